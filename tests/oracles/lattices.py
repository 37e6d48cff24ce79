"""Lattices of unit squares or cubes and their cell graph, by dictionaries of sites."""

from __future__ import annotations

import itertools
from collections.abc import Iterable

import numpy as np

from sfcpart.graph import CellGraph
from sfcpart.mesh.mesh import Mesh

__all__ = ["box", "graph_of_edges", "lattice_graph", "lattice_mesh"]


def box(*sides: int) -> list[tuple[int, ...]]:
    """List the sites of a full box, first axis fastest."""
    return [site[::-1] for site in itertools.product(*(range(n) for n in reversed(sides)))]


def graph_of_edges(
    n_cells: int,
    edges: Iterable[tuple[int, int, float]],
    boundary: Iterable[tuple[int, float]] = (),
) -> CellGraph:
    """Make the symmetric CSR graph of faces (cell, cell, measure) and boundary faces."""
    rows: list[list[tuple[int, float]]] = [[] for _ in range(n_cells)]
    for a, b, measure in edges:
        rows[a].append((b, measure))
        rows[b].append((a, measure))
    count = np.zeros(n_cells, np.int32)
    total = np.zeros(n_cells)
    for cell, measure in boundary:
        count[cell] += 1
        total[cell] += measure
    flat = [entry for row in rows for entry in sorted(row)]
    return CellGraph(
        indptr=np.cumsum([0] + [len(row) for row in rows]).astype(np.int64),
        indices=np.array([j for j, _ in flat], np.int32),
        data=np.array([measure for _, measure in flat], np.float64),
        boundary_count=count,
        boundary_measure=total,
    )


def lattice_graph(sites: list[tuple[int, ...]], *, spacing: float = 1.0) -> CellGraph:
    """Join sites one step apart; every other side of a cell is a boundary face."""
    number = {site: k for k, site in enumerate(sites)}
    face = spacing ** (len(sites[0]) - 1)
    edges, boundary = [], []
    for site, k in number.items():
        for axis in range(len(site)):
            for step in (-1, 1):
                other = number.get((*site[:axis], site[axis] + step, *site[axis + 1 :]))
                if other is None:
                    boundary.append((k, face))
                elif other > k:
                    edges.append((k, other, face))
    return graph_of_edges(len(sites), edges, boundary)


def lattice_mesh(sites: list[tuple[int, ...]], *, spacing: float = 1.0) -> Mesh:
    """Make quads or hexahedra (points of its own for each cell: the graph is given apart)."""
    corner = np.array(sites, np.float64) * spacing
    if corner.shape[1] == 2:
        offsets = np.array([[0, 0], [1, 0], [1, 1], [0, 1]]) * spacing
        name = "quad"
    else:
        square = [[0, 0], [1, 0], [1, 1], [0, 1]]
        offsets = np.array([[*xy, z] for z in (0, 1) for xy in square]) * spacing
        name = "hexahedron"
    points = (corner[:, None, :] + offsets[None]).reshape(-1, corner.shape[1])
    return Mesh.from_arrays(points, {name: np.arange(len(points)).reshape(len(sites), -1)})
