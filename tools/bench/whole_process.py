"""Whole processes against each other: start, split of a VTU, peak memory of big meshes.

    python tools/bench/whole_process.py help        sfcpart --help against bare Python
    python tools/bench/whole_process.py vtu         10^6 tets, VTU, 64 parts, against meshio alone
    python tools/bench/whole_process.py hexes       10^7 hexahedra, VTKHDF: peak memory
    python tools/bench/whole_process.py first       the first run ever: time spent compiling

Every figure is a ratio within one run, of medians; memory is the kernel's own count of the
largest resident set of the child (wait4). Meshes are made in a temporary folder first.
"""

from __future__ import annotations

import argparse
import os
import shutil
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import NamedTuple

HERE = Path(__file__).resolve().parent
ENTRY = [sys.executable, "-c", "from sfcpart.cli import main; main()"]
READ_ONLY = "import sys, meshio; meshio.read(sys.argv[1])"


class Run(NamedTuple):
    """Seconds of wall time and of processors, bytes of the largest resident set."""

    wall: float
    processor: float
    memory: int


def run(command: list[str], **environment: str) -> Run:
    """Run a command to its end; a failure ends the bench."""
    start = time.perf_counter()
    child = subprocess.Popen(command, stdout=subprocess.DEVNULL, env={**os.environ, **environment})
    _, status, usage = os.wait4(child.pid, 0)
    child.returncode = os.waitstatus_to_exitcode(status)
    if child.returncode:
        raise SystemExit(f"{' '.join(command)}: exit code {child.returncode}")
    processor = usage.ru_utime + usage.ru_stime
    return Run(time.perf_counter() - start, processor, usage.ru_maxrss * 1024)


def alternate(first: list[str], second: list[str], *, runs: int) -> tuple[Run, Run]:
    """Run two commands in turn; return the medians of each."""
    rows = [(run(first), run(second)) for _ in range(runs)]
    ours, other = (
        Run(*map(statistics.median, zip(*side, strict=True))) for side in zip(*rows, strict=True)
    )
    return ours, other


def compared(name: str, ours: Run, other_name: str, other: Run, *, most: float) -> str:
    """Say both times and their ratio, of wall time and of processor time."""
    return (
        f"{name} {ours.wall:.3f} s, {other_name} {other.wall:.3f} s: ratio "
        f"{ours.wall / other.wall:.2f} (wanted at most {most:g}); of processor time "
        f"{ours.processor / other.processor:.2f}"
    )


def make(what: str, n_cells: int, path: Path) -> None:
    command = [sys.executable, str(HERE.parent / "make_big.py"), what, str(n_cells), str(path)]
    subprocess.run(command, check=True, stdout=subprocess.DEVNULL)


def bench_help(folder: Path, *, runs: int, n_cells: int) -> None:
    entry = shutil.which("sfcpart")
    command = [entry] if entry else ENTRY
    ours, bare = alternate([*command, "--help"], [sys.executable, "-c", "pass"], runs=4 * runs)
    print(compared("sfcpart --help", ours, "bare Python", bare, most=6))


def bench_vtu(folder: Path, *, runs: int, n_cells: int) -> None:
    path = folder / "tets.vtu"
    make("tets", n_cells or 1_000_000, path)
    split = [*ENTRY, "split", str(path), "--parts", "64", "-o", str(folder / "parts"), "-q"]
    split.append("--overwrite")
    run(split)  # compile
    ours, alone = alternate(split, [sys.executable, "-c", READ_ONLY, str(path)], runs=runs)
    cells = _cells(path)
    most = 350e6 + 500 * cells
    print(compared(f"split of {cells:,} tets", ours, "meshio alone", alone, most=4))
    print(f"peak memory {ours.memory / 1e6:.0f} MB (wanted at most {most / 1e6:.0f} MB)")


def bench_hexes(folder: Path, *, runs: int, n_cells: int) -> None:
    path = folder / "hexes.vtkhdf"
    make("hexes", n_cells or 10_000_000, path)
    split = [*ENTRY, "split", str(path), "--parts", "64", "-o", str(folder / "parts"), "-q"]
    cells = _cells(path)
    ours = run(split)
    print(f"split of {cells:,} hexahedra from VTKHDF {ours.wall:.1f} s, peak memory ", end="")
    print(
        f"{ours.memory / 1e6:.0f} MB, {ours.memory / cells:.0f} bytes a cell (wanted at most 600)"
    )


def bench_first(folder: Path, *, runs: int, n_cells: int) -> None:
    mesh = HERE.parent.parent / "meshes" / "channel_mixed.vtu"
    split = [*ENTRY, "split", str(mesh), "--parts", "8", "-o", str(folder / "parts"), "--overwrite"]
    cold, warm = (run(split, NUMBA_CACHE_DIR=str(folder / "kernels")) for _ in range(2))
    print(f"first run {cold.wall:.1f} s, second {warm.wall:.1f} s: ", end="")
    print(
        f"{cold.wall - warm.wall:.1f} s of compiling (wanted at most 20); of processor time ",
        end="",
    )
    print(f"{cold.processor - warm.processor:.1f} s")


def _cells(path: Path) -> int:
    """Return the number of cells, in a process of its own."""
    code = "import sys, sfcpart; print(sfcpart.read_mesh(sys.argv[1]).n_cells)"
    return int(subprocess.check_output([sys.executable, "-c", code, str(path)]))


BENCHES = {"help": bench_help, "vtu": bench_vtu, "hexes": bench_hexes, "first": bench_first}


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("what", nargs="*", help="default: all")
    parser.add_argument("--runs", type=int, default=5)
    parser.add_argument("--cells", type=lambda text: int(float(text)), default=0)
    asked = parser.parse_args()
    for name in asked.what or BENCHES:
        with tempfile.TemporaryDirectory() as folder:
            BENCHES[name](Path(folder), runs=asked.runs, n_cells=asked.cells)


if __name__ == "__main__":
    main()
