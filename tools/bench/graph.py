"""Time and memory of the cell graph of random Delaunay tetrahedra, as ratios within one run.

    python tools/bench/graph.py [--points 160000] [--repeat 7]

The mesh: Delaunay tetrahedra of `--points` uniform points of `numpy.random.default_rng(0)` (160,000
give 1,076,922 tetrahedra). The yardstick: `numpy.sort` of one int64 key a face of each
tetrahedron, 4 n keys. Target: the graph with face measures takes at most 2.0 times that in wall
time, on two free cores. The ratio of processor times, all threads added up, is printed beside it:
it says more where other work shares the cores, but it is not what the target is about.
Memory: growth of the peak resident size of a fresh process that builds the graph once more.
"""

from __future__ import annotations

import argparse
import json
import os
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

from sfcpart.graph import cell_graph
from sfcpart.kernels.threads import n_threads
from sfcpart.mesh.mesh import Mesh

TARGET = 2.0


def reference(n_points: int) -> tuple[np.ndarray, np.ndarray]:
    """Make the reference mesh, points and tetrahedra."""
    from scipy.spatial import Delaunay

    points = np.random.default_rng(0).random((n_points, 3))
    return points, np.ascontiguousarray(Delaunay(points).simplices, dtype=np.int32)


def face_keys(tetra: np.ndarray, n_points: int) -> np.ndarray:
    """Write the three corners of every face of every tetrahedron, in order, as one int64."""
    corner = np.sort(tetra, axis=1).astype(np.int64)
    faces = [corner[:, list(f)] for f in ((0, 1, 2), (0, 1, 3), (0, 2, 3), (1, 2, 3))]
    base = np.int64(n_points)
    return np.concatenate([(f[:, 0] * base + f[:, 1]) * base + f[:, 2] for f in faces])


def seconds(call: Callable[[], object]) -> tuple[float, float]:
    """Time one call: wall time, processor time of all threads."""
    wall, processor = time.perf_counter(), time.process_time()
    call()
    return time.perf_counter() - wall, time.process_time() - processor


def resident(field: str) -> int:
    """Return VmRSS (now) or VmHWM (peak) of this process in bytes (not of its parent)."""
    lines = Path("/proc/self/status").read_text().splitlines()
    return 1024 * next(int(line.split()[1]) for line in lines if line.startswith(field + ":"))


def memory_child(folder: str) -> None:
    """Build the graph once in this fresh process and print how far the peak rose, in bytes."""
    points, tetra = np.load(f"{folder}/points.npy"), np.load(f"{folder}/tetra.npy")
    cell_graph(Mesh.from_arrays(points[:5], {"tetra": tetra[:1] * 0 + np.arange(4)}))  # compile
    mesh = Mesh.from_arrays(points, {"tetra": tetra})
    before = resident("VmRSS")
    graph = cell_graph(mesh)
    kept = sum(
        array.nbytes
        for array in (
            graph.indptr,
            graph.indices,
            graph.data,
            graph.boundary_count,
            graph.boundary_measure,
        )
    )
    print(json.dumps({"rise": resident("VmHWM") - before, "kept": kept}))


def main() -> None:
    """Run both measurements and print the figures."""
    parser = argparse.ArgumentParser(description=__doc__.split("\n", 1)[0])
    parser.add_argument("--points", type=int, default=160_000)
    parser.add_argument("--repeat", type=int, default=7)
    parser.add_argument("--memory-of", help=argparse.SUPPRESS)
    options = parser.parse_args()
    if options.memory_of:
        memory_child(options.memory_of)
        return
    points, tetra = reference(options.points)
    keys = face_keys(tetra, len(points))
    cell_graph(Mesh.from_arrays(points, {"tetra": tetra}))  # compile
    ratios, graph_times, processor = [], [], []
    for _ in range(options.repeat):
        sort_wall, sort_processor = seconds(lambda: np.sort(keys))
        mesh = Mesh.from_arrays(points, {"tetra": tetra})
        graph_wall, graph_processor = seconds(lambda mesh=mesh: cell_graph(mesh))
        graph_times.append(graph_wall)
        ratios.append(graph_wall / sort_wall)
        processor.append(graph_processor / sort_processor)
    ratio = statistics.median(ratios)
    print(
        f"{len(tetra)} tetrahedra, {len(keys)} face keys, "
        f"{n_threads()} threads, {os.cpu_count()} cores"
    )
    print(f"cell graph: median {statistics.median(graph_times):.3f} s")
    print(
        f"ratio to np.sort of the keys: median {ratio:.2f}, {min(ratios):.2f} to {max(ratios):.2f}"
    )
    print(f"ratio of processor times: median {statistics.median(processor):.2f} (for information)")
    print(f"load average {os.getloadavg()[0]:.1f} on {os.cpu_count()} cores")
    with tempfile.TemporaryDirectory() as folder:
        np.save(Path(folder) / "points.npy", points)
        np.save(Path(folder) / "tetra.npy", tetra)
        command = [sys.executable, __file__, "--memory-of", folder]
        told = json.loads(subprocess.run(command, check=True, capture_output=True).stdout)
    print(
        f"memory: the peak rises by {told['rise'] / len(tetra):.0f} bytes a cell, "
        f"of which the graph keeps {told['kept'] / len(tetra):.0f}"
    )
    print(f"target {TARGET}: {'met' if ratio <= TARGET else 'MISSED'}")


if __name__ == "__main__":
    main()
