"""Whether an MPI launcher started this process, told without loading anything."""

from __future__ import annotations

import os

__all__ = ["launched"]

MARKS = ("PMI_RANK", "PMIX_RANK", "OMPI_COMM_WORLD_RANK", "MV2_COMM_WORLD_RANK")
"""What launchers put into the environment of each process they start."""


def launched() -> bool:
    """Tell whether an MPI launcher started this process.

    Examples
    --------
    >>> launched()
    False
    """
    return any(mark in os.environ for mark in MARKS)
