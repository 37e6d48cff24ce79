"""Ranks as MPI processes: the one home of mpi4py.

Only what this room holds may import mpi4py; importing it starts MPI.
"""

from __future__ import annotations

from sfcpart.comm.mpi.adopting import adopted
from sfcpart.comm.mpi.communicator import MpiComm

__all__ = ["MpiComm", "adopted"]
