"""Single files that a verb writes: there completely, or as they were before."""

from __future__ import annotations

import os
import secrets
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

from sfcpart.errors import FileError

__all__ = ["new_file"]


@contextmanager
def new_file(path: str) -> Iterator[Path]:
    """Give a name beside `path` to write to; on leaving, put the file in place in one step.

    Raises
    ------
    FileError
        If it cannot be written; what was there before is still there.
    """
    target = Path(os.path.realpath(path))
    if target.is_dir():
        raise FileError(f"{path}: cannot be written: it is a folder")
    if target.exists() and not target.is_file():  # such as /dev/stdout
        yield target
        return
    beside = target.with_name(f".{target.name}.{secrets.token_hex(4)}.tmp")
    try:
        yield beside
        with beside.open("rb") as file:
            os.fsync(file.fileno())
        beside.replace(target)
    except FileError as error:  # the user asked for `path` and never saw the other name
        raise FileError(str(error).replace(str(beside), path)) from error
    except OSError as error:
        raise FileError(f"{path}: cannot be written: {error.strerror or error}") from error
    finally:
        beside.unlink(missing_ok=True)
