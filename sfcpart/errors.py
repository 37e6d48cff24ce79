"""Exception classes: one base, each child also the built-in a caller expects.

A message says what was found, what was wanted and what to do, in one line.
"""

from __future__ import annotations

__all__ = [
    "FileError",
    "InputError",
    "InsufficientMemoryError",
    "MeshError",
    "PartitionError",
    "RankError",
    "SfcpartError",
    "WeightError",
]


class SfcpartError(Exception):
    """Base of every error that sfcpart raises on purpose."""


class InputError(SfcpartError, ValueError):
    """An argument has a wrong value, shape or type."""


class MeshError(InputError):
    """A mesh is not one: bad indices, coordinates, cells or faces."""


class WeightError(InputError):
    """Weights, speeds, limits or groups are unusable."""


class PartitionError(InputError):
    """A partition is wrong, or the one asked for cannot exist."""


class FileError(SfcpartError, OSError):
    """A file or folder cannot be read or written."""


class InsufficientMemoryError(SfcpartError, MemoryError):
    """The work would not fit the memory there is."""


class RankError(SfcpartError, RuntimeError):
    """Another rank of the job failed; the message names it."""
