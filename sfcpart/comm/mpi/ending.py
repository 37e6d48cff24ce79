"""What MPI offers to end a job: a barrier that nobody waits in, and an abort."""

from __future__ import annotations

import os
import time
from collections.abc import Callable
from contextlib import suppress
from functools import lru_cache

import numpy as np
from mpi4py import MPI

from sfcpart.comm.witness import Witness

__all__ = ["everyone_failed", "prepare", "silent_abort", "this_rank", "witness"]

GRACE = 0.5
"""Seconds in which all ranks must have failed, if the error is everyone's."""
STAGGER = 0.02
"""Seconds that each rank waits longer than the one before, so that one speaks first ..."""
MOST_STAGGERED = 50
SILENT = 10.0
"""Seconds a rank that stays silent waits for the one that speaks to abort the job."""
_CLAIM = 7


@lru_cache(maxsize=1)
def prepare() -> MPI.Intracomm:
    """Return the communicator on which ranks tell each other that they failed; collective."""
    witness()
    return MPI.COMM_WORLD.Dup()


@lru_cache(maxsize=1)
def witness() -> Witness | None:
    """Return this rank's witness, made on first use; None where no file can be held open."""
    with suppress(OSError):
        return Witness(MPI.COMM_WORLD.Get_rank(), MPI.COMM_WORLD.Get_size())
    return None


def this_rank() -> int:
    """Return the number of this process among all of the job."""
    return int(MPI.COMM_WORLD.Get_rank())


def everyone_failed(speak_up: Callable[[], None]) -> bool:
    """Tell whether all ranks are here, having failed; if not, let one that failed speak up."""
    comm = prepare()
    waiting = comm.Ibarrier()
    end = time.monotonic() + GRACE + STAGGER * min(comm.rank, MOST_STAGGERED)
    while time.monotonic() < end:
        if waiting.Test():
            return True
        if comm.Iprobe(MPI.ANY_SOURCE, _CLAIM):
            time.sleep(SILENT)  # another rank speaks, and ends the job
            return False
        time.sleep(0.002)
    claim = np.zeros(1, np.uint8)
    for rank in range(comm.size):
        if rank != comm.rank:
            comm.Isend(claim, rank, _CLAIM)
    speak_up()
    return False


def silent_abort(code: int) -> int:
    """End all processes of the job; MPI's own lines about it are not shown."""
    if (seen_by := witness()) is not None:
        seen_by.aborts()
    time.sleep(0.1)  # what was printed is on its way through the launcher
    nowhere = os.open(os.devnull, os.O_WRONLY)
    os.dup2(nowhere, 2)
    MPI.COMM_WORLD.Abort(code)
    return code
