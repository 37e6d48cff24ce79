"""Time measuring a partition against one sort of the mesh's face keys.

    python tools/bench/measure.py [--side 55] [--parts 64] [--repeats 5]

The mesh is a jittered lattice of 6 side^3 tets (10^6 by default) in random cell order, the worst
case for memory; the partition is a grid of boxes. The reference is `np.sort` of as many int64 as
the mesh has faces of cells, as for the cell graph. Medians of one run, kernels compiled before;
CPU seconds beside, since another job on the machine lengthens the wall time only.
"""

from __future__ import annotations

import argparse
import statistics
import time
from collections.abc import Callable

import numpy as np

from sfcpart.graph import cell_graph
from sfcpart.kernels.threads import n_threads
from sfcpart.measure import assess_partition
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.shapes import jittered_tets
from sfcpart.partition import Partition


def median_times(call: Callable[[], object], repeats: int) -> tuple[float, float]:
    call()
    wall, cpu = [], []
    for _ in range(repeats):
        began = time.perf_counter(), time.process_time()
        call()
        wall.append(time.perf_counter() - began[0])
        cpu.append(time.process_time() - began[1])
    return statistics.median(wall), statistics.median(cpu)


def boxes(centers: np.ndarray, n_parts: int) -> Partition:
    """Cut the box along each axis in turn until there are enough boxes."""
    extent = centers.max(axis=0) - centers.min(axis=0)
    place = (centers - centers.min(axis=0)) / (extent * (1 + 1e-12))
    part, axis, left = np.zeros(len(centers), np.int64), 0, n_parts
    while left > 1:
        factor = next(k for k in range(2, left + 1) if left % k == 0)
        scaled = place[:, axis % 3] * factor
        part = part * factor + scaled.astype(np.int64)
        place[:, axis % 3] = scaled % 1
        axis, left = axis + 1, left // factor
    return Partition.from_array(part, n_parts)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--side", type=int, default=55)
    parser.add_argument("--parts", type=int, default=64)
    parser.add_argument("--repeats", type=int, default=5)
    given = parser.parse_args()
    random = np.random.default_rng(0)
    shape = jittered_tets((given.side,) * 3)
    tets = shape.cells["tetra"]
    mesh = Mesh.from_arrays(shape.points, {"tetra": tets[random.permutation(len(tets))]})
    graph = cell_graph(mesh)
    partition = boxes(mesh.centers, given.parts)
    keys = random.integers(0, 2**62, 4 * mesh.n_cells)
    work = {
        "np.sort of the face keys": lambda: np.sort(keys),
        "assess": lambda: assess_partition(mesh, graph, partition),
        "assess without faces": lambda: assess_partition(mesh, None, partition),
    }
    times = {name: median_times(call, given.repeats) for name, call in work.items()}
    reference = times["np.sort of the face keys"][0]
    print(f"{mesh.n_cells} tets in {given.parts} parts, {n_threads()} threads")
    for name, (wall, cpu) in times.items():
        print(f"  {name:26s} {wall:7.3f} s   cpu {cpu:7.3f} s   ratio {wall / reference:.3f}")


if __name__ == "__main__":
    main()
