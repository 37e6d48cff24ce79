"""Exit codes of the command line, in one table that help, README and code share."""

from __future__ import annotations

from typing import NamedTuple

__all__ = ["EXITS", "Exit", "code_of", "exit_table"]


class Exit(NamedTuple):
    """One exit code: its number, when it is used, and the error classes that lead to it."""

    code: int
    meaning: str
    errors: tuple[str, ...] = ()


EXITS: tuple[Exit, ...] = (
    Exit(0, "done"),
    Exit(2, "the command line was wrong", ("UsageError",)),
    Exit(3, "the mesh, a field or a weight was wrong", ("InputError",)),
    Exit(4, "a file or folder could not be read or written", ("FileError", "OSError")),
    Exit(5, "the parts asked for cannot exist, or a partition was wrong", ("PartitionError",)),
    Exit(6, "not enough memory", ("MemoryError",)),
    Exit(7, "another rank of the job failed", ("RankError",)),
    Exit(70, "a defect in sfcpart: please report it"),
    Exit(130, "interrupted", ("KeyboardInterrupt",)),
    Exit(141, "the reader of the output went away", ("BrokenPipeError",)),
)
_CODE = {name: row.code for row in EXITS for name in row.errors}


def code_of(error: BaseException) -> int:
    """Return the exit code of the most special class of an error that the table knows."""
    for cls in type(error).__mro__:
        if cls.__name__ in _CODE:
            return _CODE[cls.__name__]
    return 70


def exit_table() -> str:
    """Return the table as text, one code a line."""
    return "\n".join(f"{row.code:>4}  {row.meaning}" for row in EXITS)
