"""Ranks: one contract (`sfcpart.comm.base`), three communicators."""

from __future__ import annotations

from functools import lru_cache
from typing import TYPE_CHECKING, Any, cast

from sfcpart.comm.ending import ending_together, removed_on_abort
from sfcpart.comm.serial import SerialComm
from sfcpart.comm.thread import ThreadComm, run_ranks
from sfcpart.errors import InputError
from sfcpart.launcher import launched

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = [
    "SerialComm",
    "ThreadComm",
    "adopt",
    "ending_together",
    "removed_on_abort",
    "run_ranks",
    "world",
]


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
    if launched():
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
