"""Ranks: one contract (`sfcpart.comm.base`), three communicators."""

from __future__ import annotations

import os
from functools import lru_cache
from typing import TYPE_CHECKING

from sfcpart.comm.serial import SerialComm
from sfcpart.comm.thread import ThreadComm, run_ranks

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["SerialComm", "ThreadComm", "run_ranks", "world"]

_LAUNCHER_MARKS = ("PMI_RANK", "PMIX_RANK", "OMPI_COMM_WORLD_RANK", "MV2_COMM_WORLD_RANK")
"""What MPI launchers put into the environment of each process they start."""


@lru_cache(maxsize=1)
def world() -> Comm:
    """Return all ranks of this job: MPI's under an MPI launcher, else the one rank there is.

    mpi4py is imported, and MPI started, only under a launcher. The same object is returned each
    time.

    Returns
    -------
    Comm
        A `SerialComm`, or an `MpiComm` over MPI_COMM_WORLD.

    Examples
    --------
    >>> world().size
    1
    """
    if any(mark in os.environ for mark in _LAUNCHER_MARKS):
        from sfcpart.comm.mpi import MpiComm

        return MpiComm()
    return SerialComm()
