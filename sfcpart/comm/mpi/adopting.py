"""The `MpiComm` of a communicator of the caller's: made once, then found again."""

from __future__ import annotations

from functools import lru_cache
from typing import Any

from mpi4py import MPI

from sfcpart.comm.mpi.communicator import MpiComm
from sfcpart.errors import InputError

__all__ = ["adopted"]


def adopted(communicator: Any) -> MpiComm:
    """Return the `MpiComm` over a communicator of mpi4py: made once, then found again.

    It is kept with the communicator (as an attribute, MPI's own way) and freed with it. The first
    call with a communicator is collective.
    """
    if communicator == MPI.COMM_NULL or communicator.Is_inter():
        raise InputError(
            "a communicator without ranks or between groups; wanted one group of ranks"
        )
    key = _attribute()
    mine: MpiComm | None = communicator.Get_attr(key)
    if mine is None:
        mine = MpiComm(communicator)
        communicator.Set_attr(key, mine)
    return mine


@lru_cache(maxsize=1)
def _attribute() -> int:
    """Return the key under which communicators keep their `MpiComm`."""
    return int(MPI.Comm.Create_keyval(delete_fn=lambda comm, key, mine: mine._comm.Free()))
