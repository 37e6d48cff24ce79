"""Bisection and least cuts along a curve: cut, imbalance, time on the reference mesh.

The figures in `methods/bisection/bisect.py` and `methods/curve/window_cuts.py` come from here:

    python tools/bench/classics.py [POINTS]

Processor time, since it includes no waiting; the cell graph is built beforehand.
"""

from __future__ import annotations

import sys
import time

import numpy as np
from scipy.spatial import Delaunay

import sfcpart

RUNS = [
    *[(name, 64, "balanced") for name in ("coordinate", "inertial", "spectral")],
    *[(name, 4096, "balanced") for name in ("coordinate", "inertial")],
    *[("hilbert", n, cuts) for n in (4, 16, 64, 1000) for cuts in ("balanced", "least")],
    *[("morton", 64, cuts) for cuts in ("balanced", "least")],
]


def main() -> None:
    n_points = int(sys.argv[1]) if len(sys.argv) > 1 else 160_000
    points = np.random.default_rng(0).random((n_points, 3))
    mesh = sfcpart.Mesh.from_arrays(points, {"tetra": Delaunay(points).simplices})
    graph = sfcpart.cell_graph(mesh)
    row = np.repeat(np.arange(mesh.n_cells), np.diff(graph.indptr))
    for name, _, cuts in RUNS:  # compile and load
        small = sfcpart.Mesh.from_arrays(points, {"tetra": Delaunay(points[:500]).simplices})
        sfcpart.split(small, 8, method=name, cuts=cuts)
    for name, n_parts, cuts in RUNS:
        start = time.process_time()
        part = sfcpart.split(mesh, n_parts, method=name, cuts=cuts).cell_part
        seconds = time.process_time() - start
        cut = int((part[row] != part[graph.indices]).sum()) // 2
        imbalance = np.bincount(part).max() * n_parts / mesh.n_cells - 1
        print(f"{name:10} {n_parts:5} {cuts:9} {cut:9,} {imbalance:8.3%} {seconds:7.2f} s")


if __name__ == "__main__":
    main()
