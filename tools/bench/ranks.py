"""A split on several ranks against one: time and memory of each stage, one thread a rank.

    python tools/bench/ranks.py                        10^7 hexahedra, 1 and 2 ranks
    python tools/bench/ranks.py --cells 2e6 --ranks 1 4 --runs 1

What: a VTKHDF file of hexahedra is read by slices, split along the curve (keys, cut positions,
labels), measured (cell graph and assessment) and written, each stage timed from the moment all
ranks are ready until the last has done it. Printed: seconds, how many times as fast as the first
number of ranks, processor seconds of all ranks, and the largest resident set of a rank beyond that
of the interpreter with everything loaded. Jobs alternate; medians count.
"""

from __future__ import annotations

import argparse
import json
import os
import resource
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

HERE = Path(__file__).resolve().parent
WANTED = {"keys, cuts, labels": 1.7, "split and assessment": 1.5}


def rank_main(path: str, n_parts: int, out: str) -> None:
    """Do the work of one rank; rank 0 prints what all measured."""
    import numpy as np

    from sfcpart import api
    from sfcpart.comm import world
    from sfcpart.mesh.shapes import lattice

    comm = world()
    small = lattice((8, 8, 8)).to_mesh()
    parts = api.split(small, 4)
    api.assess(small, parts)
    with tempfile.TemporaryDirectory() as place:
        api.write_split(f"{place}/parts", small, parts)
    comm.allreduce(np.zeros(1, np.int64))
    base = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss
    times: dict[str, list[float]] = {}

    def timed(name, act):
        comm.barrier()
        start, busy = time.perf_counter(), time.process_time()
        result = act()
        comm.barrier()
        times[name] = [time.perf_counter() - start, time.process_time() - busy]
        return result

    held = timed("read", lambda: api.read_slice(path, comm=comm))
    timed("centres", lambda: held.mesh.centers)
    parts = timed("keys, cuts, labels", lambda: api.split(held, n_parts))
    figures = timed("graph and assessment", lambda: api.assess(held, parts))
    split_peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - base
    timed("write", lambda: api.write_split(out, held, parts, assessment=figures))
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss - base
    rows = np.array([split_peak, peak], np.int64)
    most = comm.allreduce(rows, "max")
    busy = comm.allgather(np.array([busy for _, busy in times.values()]))
    if comm.rank == 0:
        wall = {name: wall for name, (wall, _) in times.items()}
        told = {"wall": wall, "busy": dict(zip(wall, np.sum(busy, axis=0).tolist(), strict=True))}
        told["memory"] = {"until assessed": int(most[0]) / 1024, "all": int(most[1]) / 1024}
        sys.stdout.write(json.dumps(told) + "\n")


def run(path: Path, n_ranks: int, n_parts: int, place: Path) -> dict[str, dict[str, float]]:
    """Start one job; return what it measured, with sums of stages."""
    out = place / f"out{n_ranks}"
    shutil.rmtree(out, ignore_errors=True)
    launcher = Path(sys.executable).with_name("mpiexec")
    command = [str(launcher) if launcher.exists() else "mpiexec", "-n", str(n_ranks)]
    command += [sys.executable, __file__, "--rank", str(path), str(n_parts), str(out)]
    one_thread = dict.fromkeys(("SFCPART_THREADS", "OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS"), "1")
    done = subprocess.run(
        command, env={**os.environ, **one_thread}, stdout=subprocess.PIPE, text=True, check=True
    )
    shutil.rmtree(out, ignore_errors=True)
    found = json.loads(done.stdout.splitlines()[-1])
    for kind in ("wall", "busy"):
        row = found[kind]
        row["keys, cuts, labels"] += row.pop("centres")
        row["split and assessment"] = row["keys, cuts, labels"] + row["graph and assessment"]
        row["all"] = row["read"] + row["split and assessment"] + row["write"]
    return found


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("--cells", type=float, default=1e7)
    parser.add_argument("--ranks", type=int, nargs="+", default=[1, 2])
    parser.add_argument("--parts", type=int, default=64)
    parser.add_argument("--runs", type=int, default=3)
    asked = parser.parse_args()
    with tempfile.TemporaryDirectory() as folder:
        place = Path(folder)
        path = place / "hexes.vtkhdf"
        maker = [sys.executable, str(HERE.parent / "make_big.py"), "hexes", str(asked.cells)]
        subprocess.run([*maker, str(path)], check=True)
        jobs = [
            {n: run(path, n, asked.parts, place) for n in asked.ranks} for _ in range(asked.runs)
        ]
    report(jobs, asked.ranks)


def report(jobs: list[dict[int, dict[str, dict[str, float]]]], ranks: list[int]) -> None:
    """Print medians, and ratios to the first number of ranks."""
    first = ranks[0]
    for n in ranks:
        print(f"{n} rank{'s' if n > 1 else ''}")
        for name in jobs[0][first]["wall"]:
            wall, base, busy = (
                statistics.median(job[k][kind][name] for job in jobs)
                for k, kind in ((n, "wall"), (first, "wall"), (n, "busy"))
            )
            aim = f"  (aim {WANTED[name]})" if (first, n) == (1, 2) and name in WANTED else ""
            print(f"  {name:22} {wall:8.2f} s  {base / wall:5.2f} x  busy {busy:8.2f} s{aim}")
        for name in ("until assessed", "all"):
            most, base = (max(job[k]["memory"][name] for job in jobs) for k in (n, first))
            print(f"  memory {name:15} {most:8.0f} MB {most / base:5.2f} of {first} rank")


if __name__ == "__main__":
    if sys.argv[1:2] == ["--rank"]:
        rank_main(sys.argv[2], int(sys.argv[3]), sys.argv[4])
    else:
        main()
