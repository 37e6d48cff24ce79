"""Put a complete folder in the place of an old one, in one step; tell whose a folder is.

A folder that sfcpart wrote has a small list, `.sfcpart-files`, of what is in it, with sizes: a
folder that holds anything else is never removed. While it is written a folder holds a lock, by
which the next run tells a living writer from one that was killed.
Source: POSIX rename and flock; Linux renameat2(2), flag RENAME_EXCHANGE.
"""

from __future__ import annotations

import errno
import fcntl
import json
import os
import secrets
import shutil
from contextlib import suppress
from pathlib import Path

__all__ = [
    "LOCK",
    "MANIFEST",
    "flush",
    "foreign_entry",
    "put_in_place",
    "recover",
    "remove_result",
    "temporary_beside",
    "write_manifest",
]

MANIFEST = ".sfcpart-files"
LOCK = ".sfcpart-lock"
_RENAME_EXCHANGE = 2
_AT_FDCWD = -100
_NO_EXCHANGE = frozenset({errno.ENOSYS, errno.EINVAL, errno.ENOTSUP})


def foreign_entry(folder: Path) -> str | None:
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
        elif name in (MANIFEST, LOCK):
            continue
        elif name not in sizes:
            return f"sfcpart did not write {name}"
        elif entry.lstat().st_size != sizes[name]:
            return f"{name} was changed since"
    return None


def temporary_beside(target: Path) -> tuple[Path, int]:
    """Make and lock a temporary folder beside the target."""
    temporary = target.parent / f"{_prefix(target)}{secrets.token_hex(4)}.tmp"
    temporary.mkdir()
    lock = os.open(temporary / LOCK, os.O_CREAT | os.O_RDWR | os.O_CLOEXEC)
    with suppress(OSError):  # some network file systems have no locks: then nothing is stale
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    return temporary, lock


def _prefix(target: Path) -> str:
    """Return how the names of a target's temporary folders begin."""
    return f".{target.name}.sfcpart-"


def recover(target: Path) -> None:
    """Put back an old result and remove what killed runs left beside the target."""
    for entry in sorted(target.parent.glob(f"{_glob_escaped(_prefix(target))}*.old")):
        if target.exists():
            remove_result(entry)
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
        lock = os.open(temporary / LOCK, os.O_RDWR | os.O_CLOEXEC)
    except FileNotFoundError:
        remove_result(temporary)  # a replaced result, or a run that died before it wrote
        return
    try:
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
        shutil.rmtree(temporary, ignore_errors=True)
    except OSError:
        pass  # its writer lives
    finally:
        os.close(lock)


def remove_result(folder: Path) -> None:
    """Remove an old result if it holds only what sfcpart wrote; its list goes last."""
    with suppress(OSError):
        if (folder / MANIFEST).exists():
            if foreign_entry(folder) is not None:
                return
            for entry in sorted(folder.rglob("*"), reverse=True):
                if entry.is_dir() and not entry.is_symlink():
                    entry.rmdir()
                elif entry.name != MANIFEST:
                    entry.unlink()
            (folder / MANIFEST).unlink()
        folder.rmdir()


def write_manifest(folder: Path) -> None:
    """List the files of a folder with their sizes."""
    sizes = {
        entry.relative_to(folder).as_posix(): entry.stat().st_size
        for entry in sorted(folder.rglob("*"))
        if entry.is_file() and entry.name != LOCK
    }
    text = json.dumps({"written_by": "sfcpart", "files": sizes}, indent=1)
    (folder / MANIFEST).write_text(text + "\n", encoding="utf-8")


def flush(folder: Path) -> None:
    """Bring a folder and everything in it to the disk."""
    for entry in [*folder.rglob("*"), folder]:
        descriptor = os.open(entry, os.O_RDONLY)
        try:
            os.fsync(descriptor)
        finally:
            os.close(descriptor)


def put_in_place(temporary: Path, target: Path) -> None:
    """Rename the complete folder into place; an old one changes places with it."""
    if not target.exists() or not any(target.iterdir()):
        temporary.rename(target)
    elif not _exchanged(temporary, target):
        _replace_in_two_steps(temporary, target)
    (target / LOCK).unlink(missing_ok=True)
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
    remove_result(old)


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
