"""The job of `test_split.py`: every rank splits its slice of every problem."""

from __future__ import annotations

import sys
from pathlib import Path

import numpy as np

from sfcpart.api import split
from sfcpart.comm import world
from sfcpart.curve import curve_order
from sfcpart.methods.registry import METHODS
from sfcpart.slices.mesh_slice import cut_mesh
from tests.laws import PROBLEMS, problem_of
from tests.strategies import grid

METHODS_OF = {"lattice": [m.name for m in METHODS.values() if not m.needs_graph]}
"""Methods to try on a problem; only "hilbert" where nothing is said."""


def main() -> None:
    comm = world()
    seen = {}
    for name in PROBLEMS:
        problem = problem_of(name, comm)
        seen[f"{name} order"] = curve_order(problem.centers, comm=comm)
        for method in METHODS_OF.get(name, ["hilbert"]):
            seen[f"{name} {method}"] = METHODS[method].run(problem)
    mesh = grid((4, 4, 4), simplices=True)
    seen["smoothed"] = split(cut_mesh(mesh, comm), 5, method="smoothed").cell_part
    whole = {key: comm.allgather(mine) for key, mine in seen.items()}
    if comm.rank == 0:
        joined = {key: np.concatenate(pieces) for key, pieces in whole.items()}
        np.savez(Path(sys.argv[1]) / "seen.npz", **joined)


if __name__ == "__main__":
    main()
