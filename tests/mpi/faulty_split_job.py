"""The job of `test_faulty_split.py`: `sfcpart split` on three ranks, one of which fails.

The folder's name says how; the file `mesh` in it names the mesh.
"""

from __future__ import annotations

import os
import resource
import signal
import sys
from pathlib import Path

import numpy as np

FAILING = 1


def bad_slice(rank: int) -> None:
    """Let one rank find something wrong after it has read its slice, alone."""
    import sfcpart.api.divide as divide
    from sfcpart.errors import MeshError

    plan = divide.plan_problem

    def planned(*given, **options):
        if rank == FAILING:
            raise MeshError("cell 7 of the slice has no points")
        return plan(*given, **options)

    divide.plan_problem = planned


def full_disk(rank: int) -> None:
    """Let one rank write no more than a few bytes to a file, as on a full disk."""
    if rank == FAILING:
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        hard = resource.getrlimit(resource.RLIMIT_FSIZE)[1]
        resource.setrlimit(resource.RLIMIT_FSIZE, (2_000, hard))


def while_writing(rank: int, act) -> None:
    """Let one rank do something once it has begun to write."""
    import sfcpart.deliver as deliver

    write = deliver._write_parts

    def written(place, *given, **options):
        if rank == FAILING:
            act(place)
        return write(place, *given, **options)

    deliver._write_parts = written


def no_memory(rank: int) -> None:
    """Let one rank run out of the memory it may have."""

    def act(place) -> None:
        resource.setrlimit(resource.RLIMIT_AS, (8_000_000_000, 8_000_000_000))
        np.ones(10**10)

    while_writing(rank, act)


def killed(rank: int) -> None:
    """Kill one rank when the temporary folder is there."""

    def act(place) -> None:
        assert place.exists()
        os.kill(os.getpid(), signal.SIGKILL)

    while_writing(rank, act)


def sound(rank: int) -> None:
    """Let all be well."""


def main() -> None:
    from sfcpart.cli.run import run
    from sfcpart.comm import world

    folder = Path(sys.argv[1])
    globals()[folder.name](world().rank)
    mesh = (folder / "mesh").read_text()
    whole = resource.getrlimit(resource.RLIMIT_FSIZE)
    code = run(["split", mesh, "-n", "4", "-o", str(folder / "parts"), "--overwrite", "-q"])
    resource.setrlimit(resource.RLIMIT_FSIZE, (whole[1], whole[1]))  # for what is written at exit
    sys.exit(code)


if __name__ == "__main__":
    main()
