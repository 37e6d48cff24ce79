"""Least cuts of small lattices, found by trying everything."""

from __future__ import annotations

import itertools

import numpy as np

__all__ = ["least_cuts_of_all_splits", "least_faces_of_subsets", "least_faces_of_towers"]

_NONE = 10**6


def least_faces_of_subsets(sides: tuple[int, ...], *, with_boundary: bool) -> list[int]:
    """Return the least faces around any n cells of a box, n = 0 .. all, over all subsets.

    Layers along the first axis are added one by one; every layer may be any subset. With the
    boundary of the box counted, or only faces between cells inside and outside the subset.
    """
    n_layer = int(np.prod(sides[1:]))
    layer = np.array(list(itertools.product((0, 1), repeat=n_layer)), np.int8)
    grids = layer.reshape(-1, *sides[1:]).astype(int)
    size = layer.sum(axis=1)
    pad = 1 if with_boundary else 0
    inner = np.zeros(len(layer), int)
    for axis in range(1, grids.ndim):
        width = [(0, 0)] * grids.ndim
        width[axis] = (pad, pad)
        around = np.abs(np.diff(np.pad(grids, width), axis=axis))
        inner += around.reshape(len(layer), -1).sum(axis=1)
    between = (layer[:, None, :] != layer[None, :, :]).sum(axis=2)
    end = size if with_boundary else np.zeros_like(size)
    total = n_layer * sides[0]
    best = np.full((total + 1, len(layer)), _NONE)
    best[size, np.arange(len(layer))] = inner + end
    for _ in range(sides[0] - 1):
        joined = np.full_like(best, _NONE)
        for n in range(total + 1):
            if (best[n] >= _NONE).all():
                continue
            cost = (best[n][:, None] + between).min(axis=0) + inner
            after = n + size
            fits = after <= total
            np.minimum.at(joined, (after[fits], np.flatnonzero(fits)), cost[fits])
        best = joined
    return (best + end).min(axis=1).tolist()


def least_faces_of_towers(side: int) -> list[int]:
    """Return the least inner faces around any n cells of a cube, over all down-sets.

    Pressing a set down along each axis in turn never adds a face (compression; Bollobas and
    Leader 1991), so that sets of towers whose heights fall along both axes are enough.
    """
    falling = [row for row in itertools.product(range(side + 1), repeat=side) if _falls(row)]
    rows = np.array(falling)
    size = rows.sum(axis=1)
    # Tops inside the cube, and falls along the row (they telescope).
    cost = ((rows > 0) & (rows < side)).sum(axis=1) + rows[:, 0] - rows[:, -1]
    may_follow = (rows[None, :, :] <= rows[:, None, :]).all(axis=2)
    step = np.where(may_follow, size[:, None] - size[None, :], _NONE)
    best = np.full((side**3 + 1, len(rows)), _NONE)
    best[size, np.arange(len(rows))] = cost
    for _ in range(side - 1):
        joined = np.full_like(best, _NONE)
        for n in np.flatnonzero((best < _NONE).any(axis=1)):
            after = n + size
            fits = np.flatnonzero(after <= side**3)
            reach = (best[n][:, None] + step[:, fits]).min(axis=0) + cost[fits]
            np.minimum.at(joined, (after[fits], fits), reach)
        best = joined
    return best.min(axis=1).tolist()


def _falls(row: tuple[int, ...]) -> bool:
    """Tell whether a row never rises."""
    return all(a >= b for a, b in itertools.pairwise(row))


def least_cuts_of_all_splits(
    edges: np.ndarray, n_cells: int, n_parts: int
) -> dict[tuple[int, ...], int]:
    """Return the least cut of every tuple of part sizes (falling), over all splits there are."""
    parts = np.indices((n_parts,) * n_cells, dtype=np.int8).reshape(n_cells, -1)
    cut = np.zeros(parts.shape[1], np.int16)
    for a, b in edges:
        cut += parts[a] != parts[b]
    sizes = np.array([(parts == p).sum(axis=0) for p in range(n_parts)])
    sizes = np.sort(sizes, axis=0)[::-1]
    code = np.zeros(parts.shape[1], np.int64)
    for row in sizes:
        code = code * (n_cells + 1) + row
    least: dict[tuple[int, ...], int] = {}
    for value in np.unique(code):
        chosen = code == value
        first = int(np.flatnonzero(chosen)[0])
        least[tuple(int(n) for n in sizes[:, first])] = int(cut[chosen].min())
    return least
