"""The model of a step against the solver of this folder: predicted and measured, by ranks.

    python tools/solver/calibrate.py [--ranks 1 2 4 8] [--dim 2] [--levels 7] [--steps 60]

The cell time comes from the run on one rank, latency and bandwidth from the ranks of each job
(`sfcpart network` does the same); `sfcpart.forecast` then predicts every count along the same curve
order as the solver's own split. The mesh stays as it is meanwhile. With more ranks than cores only
the counts (cells, halo cells, neighbours) can be compared: they must agree exactly.
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
from pathlib import Path

import numpy as np


def rank_main(levels: int, dim: int, steps: int, place: Path) -> None:
    """Do the work of one rank; rank 0 writes what all measured, and on one rank the mesh."""
    from advect import Solver, options
    from flow import work_of
    from forest import rows_of
    from mpi4py import MPI

    from sfcpart.api.network import measure_network

    world = MPI.COMM_WORLD
    given = options(
        ["--dim", str(dim), "--levels", str(levels), "--every", str(10**9), "--policy", "tolerance"]
    )
    solver = Solver(given, world)
    flow, work = solver.set_up(), work_of(solver.cells)  # of the split, before dye has spread
    seconds = []
    for step in range(steps + 5):
        world.Barrier()
        began = time.perf_counter()
        flow.advance(solver.cells, time=0.0 * step, watch=solver.watch)
        seconds.append(world.allreduce(time.perf_counter() - began, op=MPI.MAX))
    halo, cells = flow.halo, solver.cells
    peers = len(halo.plan.sources())
    told = {
        "step": statistics.median(seconds[5:]),
        "cells": world.allgather(len(cells["gid"])),
        "halo": world.allgather(halo.n_halo),
        "neighbours": world.allgather(peers),
        "network": None,
    }
    if world.size > 1:
        fits = measure_network(world).fits
        told["network"] = [fits[-1].latency, fits[-1].bandwidth]
    if world.rank == 0:
        (place / "told.json").write_text(json.dumps(told))
        if world.size == 1:
            near = np.searchsorted(cells["gid"], cells["near"].data)
            pair = np.stack([rows_of(cells["near"]), near], axis=1)
            center = solver.forest.center(cells)
            faces = pair[pair[:, 0] < pair[:, 1]]
            np.savez(place / "mesh.npz", faces=faces, center=center, work=work)


def run(n_ranks: int, given: argparse.Namespace, place: Path) -> dict:
    """Start one job and return what it measured."""
    launcher = Path(sys.executable).with_name("mpiexec")
    command = [str(launcher) if launcher.exists() else "mpiexec", "-n", str(n_ranks)]
    job = [str(given.levels), str(given.dim), str(given.steps), str(place)]
    one = dict.fromkeys(("SFCPART_THREADS", "OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"), "1")
    subprocess.run(
        [*command, sys.executable, __file__, "--job", *job], env={**os.environ, **one}, check=True
    )
    return json.loads((place / "told.json").read_text())


def predicted(place: Path, n_ranks: int, step_on_one: float, network: list[float] | None):
    """Forecast one count on the solver's own mesh."""
    import sfcpart
    from sfcpart.measure import StepModel

    with np.load(place / "mesh.npz") as saved:
        faces, center, work = saved["faces"], saved["center"], saved["work"]
    mesh = sfcpart.Mesh.from_faces(faces, np.ones(len(faces)), center, np.ones(len(center)))
    latency, bandwidth = network or (0.0, 1e12)
    model = StepModel.from_preset(
        cell_seconds=step_on_one / len(center),
        latency=latency,
        bandwidth=bandwidth,
        bytes_per_halo_cell=8.0,
        exchanges=1.0,
    )
    rung = sfcpart.forecast(mesh, [n_ranks], weights=work, step_model=model).rungs[0]
    parts = sfcpart.split(mesh, n_ranks, weights=work)
    part = sfcpart.assess(mesh, parts, weights=work).part
    counts = [part[name].tolist() for name in ("cells", "halo_cells", "neighbours")]
    return rung, counts


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--ranks", type=int, nargs="+", default=[1, 2, 4, 8])
    parser.add_argument("--dim", type=int, default=2, choices=(2, 3))
    parser.add_argument("--levels", type=int, default=7)
    parser.add_argument("--steps", type=int, default=60)
    given = parser.parse_args()
    print("| ranks | cells | halo cells | neighbours, most | counts agree | step, ms | predicted |")
    print("|---:|---:|---:|---:|---|---:|---:|")
    with tempfile.TemporaryDirectory() as folder:
        place = Path(folder)
        alone = run(1, given, place)["step"]
        for n_ranks in given.ranks:
            told = run(n_ranks, given, place)
            rung, counts = predicted(place, n_ranks, alone, told["network"])
            agree = counts == [told["cells"], told["halo"], told["neighbours"]]
            enough = n_ranks <= (os.cpu_count() or 1)
            measured = f"{1e3 * told['step']:.2f}" if enough else "-"
            print(
                f"| {n_ranks} | {sum(told['cells']):,} | {sum(told['halo']):,} | "
                f"{max(told['neighbours'])} | {'yes' if agree else 'NO'} | {measured} | "
                f"{1e3 * rung.step_seconds:.2f} |"
            )


if __name__ == "__main__":
    if "--job" in sys.argv:
        levels, dim, steps, place = sys.argv[2:]
        rank_main(int(levels), int(dim), int(steps), Path(place))
    else:
        main()
