"""An output folder that is there completely or not at all.

How: everything is written into a temporary folder beside the wanted one, flushed to disk and
renamed into place in one step; an older result stays until then. A run that is killed leaves
the old result, or none, and a temporary folder `.NAME.sfcpart-XXXXXXXX.tmp`, which the next run
removes once no living process holds its lock. A small list, `.sfcpart-files`, names what was
written; a folder that holds anything else is never replaced.
Cost: one flush a file. Source: POSIX rename; Linux renameat2(2), flag RENAME_EXCHANGE.
"""

from __future__ import annotations

import errno
import os
import shutil
from contextlib import ExitStack, contextmanager
from pathlib import Path
from typing import TYPE_CHECKING

from sfcpart.comm import removed_on_abort
from sfcpart.errors import FileError, SfcpartError
from sfcpart.files.parts.replacing import (
    LOCK,
    MANIFEST,
    flush,
    foreign_entry,
    put_in_place,
    recover,
    remove_result,
    temporary_beside,
    write_manifest,
)
from sfcpart.slices.gate import agreed

if TYPE_CHECKING:
    from collections.abc import Iterator
    from os import PathLike

    from sfcpart.comm.base import Comm

__all__ = ["MANIFEST", "check_output_folder", "output_folder", "shared_folder"]

_NO_ROOM = frozenset({errno.ENOSPC, errno.EDQUOT, errno.EFBIG})


@contextmanager
def output_folder(path: str | PathLike[str], *, overwrite: bool = False) -> Iterator[Path]:
    """Give a temporary folder to write to; on leaving, put it in place as `path` in one step.

    Parameters
    ----------
    path : path
        The folder to make. Missing parents are made.
    overwrite : bool, optional
        Whether an earlier result of sfcpart may be replaced. A folder that holds files sfcpart
        did not write, or that were changed since, is refused even so.

    Yields
    ------
    pathlib.Path
        An empty folder beside `path`. It is removed if the block raises.

    Raises
    ------
    FileError
        If `path` holds something, is no folder, or cannot be written; if the disk is full.

    Examples
    --------
    >>> import tempfile
    >>> place = Path(tempfile.mkdtemp()) / "parts"
    >>> with output_folder(place) as folder:
    ...     _ = (folder / "note.txt").write_text("done")
    >>> (place / "note.txt").read_text()
    'done'
    """
    target = check_output_folder(path, overwrite=overwrite)
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        recover(target)
        temporary, lock = temporary_beside(target)
    except OSError as error:
        raise _cannot(target, error) from error
    try:
        yield temporary
        write_manifest(temporary)
        flush(temporary)
        check_output_folder(target, overwrite=overwrite)
        put_in_place(temporary, target)
    except FileError as error:
        raise _told(error, temporary, target) from error
    except SfcpartError:
        raise
    except OSError as error:
        raise _cannot(target, error) from error
    finally:
        if (temporary / LOCK).exists():  # our own half-written one
            shutil.rmtree(temporary, ignore_errors=True)
        else:
            remove_result(temporary)
        os.close(lock)


@contextmanager
def shared_folder(
    path: str | PathLike[str], *, overwrite: bool = False, comm: Comm
) -> Iterator[Path]:
    """Give all ranks the temporary folder of `output_folder`, which rank 0 makes and puts in place.

    Parameters
    ----------
    path, overwrite
        As for `output_folder`, the same on all ranks.
    comm : Comm
        What the block raises must be raised by all ranks (`Comm.check`).

    Yields
    ------
    pathlib.Path
        The same folder on all ranks.

    Raises
    ------
    FileError
        As `output_folder`, on all ranks alike.
    """
    with ExitStack() as stack:
        made = agreed(
            comm,
            lambda: (
                stack.enter_context(output_folder(path, overwrite=overwrite))
                if comm.rank == 0
                else None
            ),
        )
        place = Path(comm.bcast_object(made))
        stack.enter_context(removed_on_abort(place))
        try:
            yield place
        except FileError as error:
            if comm.rank == 0:
                raise  # `output_folder` tells it
            raise _told(error, place, Path(os.path.realpath(path))) from error
        agreed(comm, stack.close)


def check_output_folder(path: str | PathLike[str], *, overwrite: bool = False) -> Path:
    """Refuse an output folder early, before long work; returns where it really is.

    Raises
    ------
    FileError
        As `output_folder`, as far as it can be told without writing.
    """
    if not os.fspath(path):
        raise FileError("the output folder has no name; give one")
    target = Path(os.path.realpath(path))
    try:
        _check_free(target, overwrite=overwrite)
        _check_writable(target)
    except FileError:
        raise
    except OSError as error:
        raise _cannot(target, error) from error
    return target


def _check_free(target: Path, *, overwrite: bool) -> None:
    """Refuse a target that holds something which may not be replaced."""
    if not target.exists():
        return
    if not target.is_dir():
        raise FileError(f"{target}: is a file; wanted the name of a new folder")
    held = sorted(entry.name for entry in target.iterdir())
    if target == Path.cwd() or target.is_mount():
        raise FileError(f"{target}: cannot be replaced in one step; give a new folder inside it")
    if not held:
        return
    if not overwrite:
        raise FileError(
            f"{target}: holds something already ({_seen(held)}); give another folder, or ask to "
            "overwrite"
        )
    foreign = foreign_entry(target)
    if foreign is not None:
        raise FileError(
            f"{target}: will not be overwritten, because {foreign}; move it away or give "
            "another folder"
        )


def _seen(names: list[str]) -> str:
    """Return the first name that a listing shows, else the first hidden one."""
    return next((name for name in names if not name.startswith(".")), names[0])


def _check_writable(target: Path) -> None:
    """Refuse a target whose nearest existing parent takes no new folder."""
    parent = target.parent
    while not parent.exists():
        parent = parent.parent
    if not parent.is_dir():
        raise FileError(f"{target}: cannot be made, because {parent} is a file")
    if not os.access(parent, os.W_OK | os.X_OK):
        raise FileError(f"{target}: cannot be made, because {parent} may not be written")


def _told(error: FileError, temporary: Path, target: Path) -> FileError:
    """Name the folder that the user asked for; nobody ever saw the temporary name."""
    text = str(error).replace(str(temporary), str(target))
    return FileError(text + _advice(error))


def _cannot(target: Path, error: OSError) -> FileError:
    """Say in one line why the folder could not be written."""
    reason = " ".join(str(error.strerror or error).split())
    return FileError(f"{target}: cannot be written: {reason}{_advice(error)}")


def _advice(error: OSError) -> str:
    """Say what to do if there was no room, here or, as its text tells, on another rank."""
    cause = error.__cause__
    full = isinstance(cause, OSError) and cause.errno in _NO_ROOM
    if full or any(os.strerror(number) in str(error) for number in _NO_ROOM):
        return "; make room or give another place (nothing was left there)"
    return ""
