"""Whether an MPI launcher started this process, told without loading anything."""

from __future__ import annotations

import os

__all__ = ["launched", "local_ranks"]

MARKS = ("PMI_RANK", "PMIX_RANK", "OMPI_COMM_WORLD_RANK", "MV2_COMM_WORLD_RANK")
"""What launchers put into the environment of each process they start."""


_LOCAL = ("MPI_LOCALNRANKS", "OMPI_COMM_WORLD_LOCAL_SIZE", "MV2_COMM_WORLD_LOCAL_SIZE")
"""How many of them run on this node, by launcher (common practice, no source)."""


def local_ranks() -> int:
    """Return how many ranks of the job run on this node, 1 where the launcher does not tell.

    Examples
    --------
    >>> local_ranks()
    1
    """
    told = next((os.environ[name] for name in _LOCAL if name in os.environ), "")
    return int(told) if told.isdigit() and int(told) > 0 else 1


def launched() -> bool:
    """Tell whether an MPI launcher started this process.

    Examples
    --------
    >>> launched()
    False
    """
    return any(mark in os.environ for mark in MARKS)
