"""Time exchange lists and writing against a plain write of as many bytes.

    python tools/bench/write_parts.py [--side 55] [--parts 64] [--repeats 5]

The mesh is a jittered lattice of 6 side^3 tets (10^6 by default) in random cell order, split along
the Hilbert curve. The reference writes the bytes of the VTKHDF file from memory and flushes them;
both flush. Medians of one run, kernels compiled before; CPU seconds beside, since another job on
the machine lengthens the wall time only. The last column is the ratio of CPU seconds.
"""

from __future__ import annotations

import argparse
import os
import statistics
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

from sfcpart.curve import curve_order
from sfcpart.files.parts.folder import output_folder
from sfcpart.files.parts.part import read_part
from sfcpart.files.parts.vtkhdf_write import write_vtkhdf
from sfcpart.files.parts.vtu import write_vtu_pieces
from sfcpart.graph import cell_graph
from sfcpart.halo import build_halo
from sfcpart.kernels.threads import n_threads
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


def plain_write(path: Path, data: bytes) -> None:
    with path.open("wb", buffering=0) as file:
        file.write(data)
        os.fsync(file.fileno())


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--side", type=int, default=55)
    parser.add_argument("--parts", type=int, default=64)
    parser.add_argument("--repeats", type=int, default=5)
    given = parser.parse_args()
    shape = jittered_tets((given.side,) * 3)
    tets = shape.cells["tetra"]
    mixed = np.random.default_rng(0).permutation(len(tets))
    mesh = Mesh.from_arrays(shape.points, {"tetra": tets[mixed]})
    graph, order = cell_graph(mesh), curve_order(mesh.centers)
    cell_part = np.empty(mesh.n_cells, np.int32)
    cell_part[order] = np.arange(mesh.n_cells) * given.parts // mesh.n_cells
    partition = Partition.from_array(cell_part, given.parts)
    halo = build_halo(mesh, graph, partition, order=order)
    kept = {"mesh": mesh, "partition": partition, "halo": halo}
    with tempfile.TemporaryDirectory() as scratch:
        place = Path(scratch)
        write_vtkhdf(place / "parts.vtkhdf", **kept)
        data = (place / "parts.vtkhdf").read_bytes()

        def in_folder(write: Callable[[Path], None]) -> None:
            with output_folder(place / "parts", overwrite=True) as folder:
                write(folder)

        work = {
            "plain write": lambda: plain_write(place / "plain", data),
            "halo across faces": lambda: build_halo(mesh, graph, partition, order=order),
            "halo across points": lambda: build_halo(
                mesh, None, partition, order=order, across="points"
            ),
            "VTKHDF": lambda: in_folder(lambda to: write_vtkhdf(to / "parts.vtkhdf", **kept)),
            "VTKHDF, packed": lambda: in_folder(
                lambda to: write_vtkhdf(to / "parts.vtkhdf", compress=True, **kept)
            ),
            "VTU pieces": lambda: in_folder(lambda to: write_vtu_pieces(to, **kept)),
            "read_part of all": lambda: [
                read_part(place / "parts.vtkhdf", part) for part in range(given.parts)
            ],
        }
        print(f"{mesh.n_cells} tets, {given.parts} parts, {len(data) / 1e6:.0f} MB, ", end="")
        print(f"{n_threads()} threads")
        reference = 0.0
        for name, call in work.items():
            wall, cpu = median_times(call, given.repeats)
            reference = reference or cpu
            print(f"{name:20s} {wall:7.3f} s  {cpu:7.3f} s CPU  {cpu / reference:6.2f}")


if __name__ == "__main__":
    main()
