"""The job of `test_faults.py`: rank 1 of three fails in the way that its folder's name says.

Each way writes `before` on every rank first, so that the test sees that all had started; the ranks
that do not fail wait in a collective for the one that does.
"""

from __future__ import annotations

import os
import resource
import signal
import sys
from pathlib import Path

import numpy as np

FAILING = 1


def bad_value(comm, folder):
    """Find something wrong on one rank alone, between two collectives."""
    if comm.rank == FAILING:
        raise ValueError("cell 7 has no centre")


def bad_slice(comm, folder):
    """Give `split_local` centres of a wrong shape on one rank: a collective error."""
    from sfcpart.parallel import split_local

    split_local(np.zeros((4, 2) if comm.rank != FAILING else (4, 5)), comm=comm)


def bad_exchange(comm, folder):
    """Exchange an array of a wrong length: checked on each rank alone."""
    from sfcpart.parallel import Halo

    halo = Halo.from_cells([0, 1, 2], cell_gid=[comm.rank], comm=comm)
    halo.exchange(np.zeros(7 if comm.rank == FAILING else 3))


def full_disk(comm, folder):
    """Write more than one rank may: as a full disk, `OSError`, checked together."""
    error = None
    whole = resource.getrlimit(resource.RLIMIT_FSIZE)
    if comm.rank == FAILING:
        signal.signal(signal.SIGXFSZ, signal.SIG_IGN)
        resource.setrlimit(resource.RLIMIT_FSIZE, (10_000, whole[1]))
    try:
        with (folder / f"part{comm.rank}.bin").open("wb") as file:
            file.write(bytes(100_000))
    except OSError as caught:
        error = caught
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, whole)  # for what is written at exit
    comm.check(error)


def no_memory(comm, folder):
    """Ask for more memory than one rank may have."""
    if comm.rank == FAILING:
        resource.setrlimit(resource.RLIMIT_AS, (6_000_000_000, 6_000_000_000))
        np.ones(10**10)


def killed(comm, folder):
    """Kill one rank."""
    if comm.rank == FAILING:
        os.kill(os.getpid(), signal.SIGKILL)


def killed_writing(comm, folder):
    """Kill one rank while a folder is half-written that all ranks know of."""
    from sfcpart.comm import removed_on_abort

    with removed_on_abort(folder / "parts.tmp"):
        if comm.rank == 0:
            (folder / "parts.tmp").mkdir()
            (folder / "parts.tmp" / "half").touch()
        comm.barrier()
        killed(comm, folder)
        comm.barrier()


def two_fail(comm, folder):
    """Let two of the three fail at about the same time."""
    if comm.rank != 0:
        raise ValueError(f"cell {comm.rank} has no centre")


def half_written(comm, folder):
    """Fail while a file is half-written that all ranks know of."""
    from sfcpart.comm import removed_on_abort

    with removed_on_abort(folder / "parts.tmp"):
        if comm.rank == 0:
            (folder / "parts.tmp").write_text("half")
        comm.barrier()
        if comm.rank == FAILING:
            raise ValueError("cell 7 has no centre")
        comm.barrier()


def all_fail(comm, folder):
    """Let all ranks find the same mistake, each by itself."""
    raise ValueError("no cells")


def main() -> None:
    from sfcpart.comm import ending_together, world

    folder = Path(sys.argv[1])
    with ending_together():
        comm = world()
        (folder / f"before{comm.rank}").touch()
        comm.barrier()
        globals()[folder.name](comm, folder)
        comm.barrier()
        (folder / f"after{comm.rank}").touch()


if __name__ == "__main__":
    main()
