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
import fcntl
import json
import os
import secrets
import shutil
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import TYPE_CHECKING

from sfcpart.errors import FileError, SfcpartError

if TYPE_CHECKING:
    from collections.abc import Iterator
    from os import PathLike

__all__ = ["MANIFEST", "check_output_folder", "output_folder"]

MANIFEST = ".sfcpart-files"
_LOCK = ".sfcpart-lock"
_RENAME_EXCHANGE = 2
_AT_FDCWD = -100
_NO_ROOM = frozenset({errno.ENOSPC, errno.EDQUOT, errno.EFBIG})
_NO_EXCHANGE = frozenset({errno.ENOSYS, errno.EINVAL, errno.ENOTSUP})


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
        _recover(target)
        temporary, lock = _temporary_beside(target)
    except OSError as error:
        raise _cannot(target, error) from error
    try:
        yield temporary
        _write_manifest(temporary)
        _flush(temporary)
        check_output_folder(target, overwrite=overwrite)
        _put_in_place(temporary, target)
    except FileError as error:
        # The user asked for `target` and never saw the temporary name.
        text = str(error).replace(str(temporary), str(target))
        raise FileError(text + _advice(error.__cause__)) from error
    except SfcpartError:
        raise
    except OSError as error:
        raise _cannot(target, error) from error
    finally:
        if (temporary / _LOCK).exists():  # our own half-written one
            shutil.rmtree(temporary, ignore_errors=True)
        else:
            _remove_result(temporary)
        os.close(lock)


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
    foreign = _foreign(target)
    if foreign is not None:
        raise FileError(
            f"{target}: will not be overwritten, because {foreign}; move it away or give "
            "another folder"
        )


def _seen(names: list[str]) -> str:
    """Return the first name that a listing shows, else the first hidden one."""
    return next((name for name in names if not name.startswith(".")), names[0])


def _foreign(folder: Path) -> str | None:
    """Say what in a folder sfcpart did not write, or None."""
    try:
        sizes = dict(json.loads((folder / MANIFEST).read_text(encoding="utf-8"))["files"])
    except FileNotFoundError:
        return "sfcpart did not write it"
    except (ValueError, LookupError, TypeError):
        return f"its list {MANIFEST} is damaged"
    for entry in sorted(folder.rglob("*")):
        name = entry.relative_to(folder).as_posix()
        if entry.is_dir() and not entry.is_symlink():
            if not any(known.startswith(name + "/") for known in sizes):
                return f"sfcpart did not write {name}"
        elif name in (MANIFEST, _LOCK):
            continue
        elif name not in sizes:
            return f"sfcpart did not write {name}"
        elif entry.lstat().st_size != sizes[name]:
            return f"{name} was changed since"
    return None


def _check_writable(target: Path) -> None:
    """Refuse a target whose nearest existing parent takes no new folder."""
    parent = target.parent
    while not parent.exists():
        parent = parent.parent
    if not parent.is_dir():
        raise FileError(f"{target}: cannot be made, because {parent} is a file")
    if not os.access(parent, os.W_OK | os.X_OK):
        raise FileError(f"{target}: cannot be made, because {parent} may not be written")


def _temporary_beside(target: Path) -> tuple[Path, int]:
    """Make and lock a temporary folder beside the target."""
    temporary = target.parent / f"{_prefix(target)}{secrets.token_hex(4)}.tmp"
    temporary.mkdir()
    lock = os.open(temporary / _LOCK, os.O_CREAT | os.O_RDWR | os.O_CLOEXEC)
    with suppress(OSError):  # some network file systems have no locks: then nothing is stale
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    return temporary, lock


def _prefix(target: Path) -> str:
    """Return how the names of a target's temporary folders begin."""
    return f".{target.name}.sfcpart-"


def _recover(target: Path) -> None:
    """Put back an old result and remove what killed runs left beside the target."""
    for entry in sorted(target.parent.glob(f"{_glob_escaped(_prefix(target))}*.old")):
        if target.exists():
            _remove_result(entry)
        else:
            entry.rename(target)
    for entry in target.parent.glob(f"{_glob_escaped(_prefix(target))}*.tmp"):
        _remove_stale(entry)


def _glob_escaped(text: str) -> str:
    """Escape the wildcards of a name."""
    return "".join(f"[{letter}]" if letter in "*?[" else letter for letter in text)


def _remove_stale(temporary: Path) -> None:
    """Remove a temporary folder whose writer is gone (its lock is free)."""
    try:
        lock = os.open(temporary / _LOCK, os.O_RDWR | os.O_CLOEXEC)
    except FileNotFoundError:
        _remove_result(temporary)  # a replaced result, or a run that died before it wrote
        return
    try:
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        shutil.rmtree(temporary, ignore_errors=True)
    except OSError:
        pass  # its writer lives
    finally:
        os.close(lock)


def _remove_result(folder: Path) -> None:
    """Remove an old result if it holds only what sfcpart wrote; its list goes last."""
    with suppress(OSError):
        if (folder / MANIFEST).exists():
            if _foreign(folder) is not None:
                return
            for entry in sorted(folder.rglob("*"), reverse=True):
                if entry.is_dir() and not entry.is_symlink():
                    entry.rmdir()
                elif entry.name != MANIFEST:
                    entry.unlink()
            (folder / MANIFEST).unlink()
        folder.rmdir()


def _write_manifest(folder: Path) -> None:
    """List the files of a folder with their sizes."""
    sizes = {
        entry.relative_to(folder).as_posix(): entry.stat().st_size
        for entry in sorted(folder.rglob("*"))
        if entry.is_file() and entry.name != _LOCK
    }
    text = json.dumps({"written_by": "sfcpart", "files": sizes}, indent=1)
    (folder / MANIFEST).write_text(text + "\n", encoding="utf-8")


def _flush(folder: Path) -> None:
    """Bring a folder and everything in it to the disk."""
    for entry in [*folder.rglob("*"), folder]:
        descriptor = os.open(entry, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)


def _put_in_place(temporary: Path, target: Path) -> None:
    """Rename the complete folder into place; an old one changes places with it."""
    if not target.exists() or not any(target.iterdir()):
        temporary.rename(target)
    elif not _exchanged(temporary, target):
        _replace_in_two_steps(temporary, target)
    (target / _LOCK).unlink(missing_ok=True)
    _flush_names(target.parent)


def _replace_in_two_steps(temporary: Path, target: Path) -> None:
    """Move the old result aside and the new one in; a kill between is mended by the next run."""
    old = temporary.with_suffix(".old")
    target.rename(old)
    try:
        temporary.rename(target)
    except BaseException:
        old.rename(target)
        raise
    _remove_result(old)


def _flush_names(folder: Path) -> None:
    """Bring the names in a folder to the disk, where the file system can."""
    descriptor = os.open(folder, os.O_RDONLY)
    try:
        with suppress(OSError):
            os.fsync(descriptor)
    finally:
        os.close(descriptor)


def _exchanged(one: Path, other: Path) -> bool:
    """Exchange two folders in one step, where system and file system can."""
    import ctypes

    rename = getattr(ctypes.CDLL(None, use_errno=True), "renameat2", None)
    if rename is None:
        return False
    names = (_AT_FDCWD, os.fsencode(one), _AT_FDCWD, os.fsencode(other))
    if rename(*names, _RENAME_EXCHANGE) == 0:
        return True
    number = ctypes.get_errno()
    if number in _NO_EXCHANGE:
        return False
    raise OSError(number, os.strerror(number), str(other))


def _cannot(target: Path, error: OSError) -> FileError:
    """Say in one line why the folder could not be written."""
    reason = " ".join(str(error.strerror or error).split())
    return FileError(f"{target}: cannot be written: {reason}{_advice(error)}")


def _advice(error: BaseException | None) -> str:
    """Say what to do if there was no room."""
    if isinstance(error, OSError) and error.errno in _NO_ROOM:
        return "; make room or give another place (nothing was left there)"
    return ""
