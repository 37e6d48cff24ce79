"""Ranks: one contract (`sfcpart.comm.base`), three communicators."""

from __future__ import annotations

import os
from functools import lru_cache
from typing import TYPE_CHECKING, Any, cast

from sfcpart.comm.serial import SerialComm
from sfcpart.comm.thread import ThreadComm, run_ranks
from sfcpart.errors import InputError

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["SerialComm", "ThreadComm", "adopt", "run_ranks", "world"]

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


def adopt(communicator: Any) -> Comm:
    """Return a communicator of sfcpart as it is, and one of mpi4py as an `MpiComm`.

    Parameters
    ----------
    communicator : Comm, or mpi4py.MPI.Intracomm
        The first call with one of mpi4py is collective: it is duplicated, so that no message can
        meet one of the caller's. Later calls with it return the same object.

    Raises
    ------
    InputError
        If it is neither, or joins two groups of ranks, or is MPI_COMM_NULL.

    Examples
    --------
    >>> alone = SerialComm()
    >>> adopt(alone) is alone
    True
    """
    if hasattr(communicator, "check") and hasattr(communicator, "link"):
        return cast("Comm", communicator)
    if hasattr(communicator, "Is_inter"):
        from sfcpart.comm.mpi import adopted

        return adopted(communicator)
    raise InputError(
        f"comm is {communicator!r}; wanted a communicator of mpi4py or of sfcpart.comm"
    )
