"""Halos by sets, breadth first, one part at a time: the slow, obvious twin of `sfcpart.halo`."""

from __future__ import annotations

from typing import Any

import numpy as np

__all__ = ["exchange", "halo_sets", "near_over_faces", "near_over_points"]


def near_over_faces(graph: Any) -> list[set[int]]:
    """Return the cells next to each cell in a cell graph."""
    rows = zip(graph.indptr[:-1], graph.indptr[1:], strict=True)
    return [set(graph.indices[first:last].tolist()) for first, last in rows]


def near_over_points(mesh: Any) -> list[set[int]]:
    """Return the cells that share a point with each cell."""
    cells = [
        set(mesh.indices[first:last].tolist())
        for first, last in zip(mesh.indptr[:-1], mesh.indptr[1:], strict=True)
    ]
    return [
        {j for j, other in enumerate(cells) if j != i and one & other}
        for i, one in enumerate(cells)
    ]


def halo_sets(
    near: list[set[int]], cell_part: np.ndarray, n_parts: int, layers: int
) -> list[set[int]]:
    """Return for each part the foreign cells within `layers` steps of its own."""
    halos = []
    for part in range(n_parts):
        owned = set(np.flatnonzero(cell_part == part).tolist())
        reached = set(owned)
        for _ in range(layers):
            reached |= {other for cell in reached for other in near[cell]}
        halos.append(reached - owned)
    return halos


def exchange(halo: Any) -> list[np.ndarray]:
    """Play one exchange of cell numbers; returns what each part then holds (-1: nothing came)."""
    held = [
        np.full(len(halo.owned_cells(p)) + len(halo.halo_cells(p)), -1) for p in range(halo.n_parts)
    ]
    for part in range(halo.n_parts):
        owned = halo.owned_cells(part)
        held[part][: len(owned)] = owned
    for part in range(halo.n_parts):
        for to in halo.neighbours(part):
            sent = held[part][halo.send_list(part, to)]
            held[to][halo.receive_list(to, part)] = sent
    return held
