"""Cut, balance and time of the graph methods on the reference mesh, relative to the cell graph.

`python tools/bench/graph_methods.py [n_points [n_parts]]`: the Delaunay mesh of random points
(160,000 points give 1.08e6 tetrahedra). The first run of each method warms up, the median of three
counts; ratios are taken in one run.
"""

from __future__ import annotations

import sys
import time

import numpy as np
from scipy.spatial import Delaunay

import sfcpart
from sfcpart.graph import CellGraph
from sfcpart.methods.registry import METHODS


def seconds(call, repeats: int = 3):
    """Return a call's last result and the median of its times after a warm-up."""
    result = call()
    times = []
    for _ in range(repeats):
        start = time.perf_counter()
        result = call()
        times.append(time.perf_counter() - start)
    return result, sorted(times)[len(times) // 2]


def faces_cut(graph: CellGraph, part: np.ndarray) -> int:
    row = np.repeat(part, np.diff(graph.indptr))
    return int(np.sum(row != part[graph.indices])) // 2


def main(n_points: int = 160_000, n_parts: int = 64) -> None:
    points = np.random.default_rng(0).random((n_points, 3))
    tets = Delaunay(points).simplices
    graph, graph_time = seconds(
        lambda: sfcpart.cell_graph(sfcpart.Mesh.from_arrays(points, {"tetra": tets}))
    )
    mesh = sfcpart.Mesh.from_arrays(points, {"tetra": tets})
    sfcpart.cell_graph(mesh)
    print(f"{mesh.n_cells} cells, {n_parts} parts; cell graph {graph_time:.2f} s")
    base = 0
    for name in ("hilbert", "smoothed", "multilevel"):
        assert name in METHODS
        split, spent = seconds(lambda name=name: sfcpart.split(mesh, n_parts, method=name))
        cut = faces_cut(graph, split.cell_part)
        base = base or cut
        heaviest = split.part_size().max() * n_parts / mesh.n_cells
        print(
            f"{name:12} cut {cut:8} = {cut / base:.3f} of hilbert, heaviest {heaviest:.4f}, "
            f"{spent:6.2f} s = {spent / graph_time:5.1f} cell graphs"
        )


if __name__ == "__main__":
    main(*map(int, sys.argv[1:]))
