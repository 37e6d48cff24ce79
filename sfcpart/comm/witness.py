"""A process that outlives a rank, to tell of its death: a rank that a signal kills cannot.

The rank keeps the only writing end of a pipe. Whoever leaves by itself says so there; if the pipe
ends without that word, the rank was killed. The launcher then kills the others, which die as
silently: who was first the kernel tells. All ranks of a node hold a file open in one folder, and
each witness has the closings queued in their order (inotify). The witness of the first names it,
and each removes what its rank was writing. The launcher is not held up: a witness that has spoken
lets go of the error stream.

The witness is forked while the rank is small, and does nothing but wait in a read. It leaves by
`os._exit`, so that nothing of the rank's is run twice: that is why coverage cannot see its
functions, which `tests/mpi/test_faults.py` checks by what they print and remove.
"""

from __future__ import annotations

import atexit
import ctypes
import os
import select
import shutil
import signal
import struct
import tempfile
import time
from contextlib import suppress
from pathlib import Path

__all__ = ["Witness"]

LEAVES, WRITES, HAS_WRITTEN = b".+-"
"""First bytes of what a rank says: it ends by itself, a path is half-written, it is not."""
PAUSE = 0.3
"""Seconds in which the launcher kills the ranks that may still write."""
PATIENCE = 2.0
"""Seconds in which a rank's file is closed after its pipe."""
_CLOSED, _DELETED = 0x8, 0x200  # IN_CLOSE_WRITE, IN_DELETE of inotify(7)
_EVENT = struct.Struct("iIII")


class Witness:
    """The rank's side: what it tells its witness.

    Parameters
    ----------
    rank, size : int
        What the message names.
    """

    def __init__(self, rank: int, size: int) -> None:
        job = Path(tempfile.gettempdir()) / f".sfcpart-job-{os.getuid()}-{os.getppid()}"
        job.mkdir(mode=0o700, exist_ok=True)
        self._mark = job / str(rank)
        self._held = os.open(self._mark, os.O_CREAT | os.O_WRONLY, 0o600)
        heard, self._told = os.pipe()
        ready, begun = os.pipe()
        if os.fork() == 0:  # pragma: no cover - ends by os._exit
            _wait(heard, begun, f"rank {rank} of {size} was killed by a signal", self._mark)
        os.close(heard)
        os.close(begun)
        os.read(ready, 1)  # it watches
        os.close(ready)
        atexit.register(self.leaves)

    def is_written(self, path: Path) -> None:
        """Name what is to be removed if the rank is killed."""
        self._tell(WRITES, path)

    def has_written(self, path: Path) -> None:
        """Take a name back."""
        self._tell(HAS_WRITTEN, path)

    def leaves(self) -> None:
        """Say that this rank ends by itself."""
        with suppress(OSError):
            self._mark.unlink()
        self._tell(LEAVES)

    def aborts(self) -> None:
        """Say that this rank tells why the job ends: the others will be killed, and need not."""
        with suppress(OSError):
            _told_by(self._mark.parent).touch()
        self.leaves()

    def _tell(self, word: int, path: Path | None = None) -> None:
        """Send one line; a witness that is gone does not matter."""
        text = b"" if path is None else os.fsencode(path.absolute())
        with suppress(OSError):
            os.write(self._told, bytes([word]) + text + b"\n")


def _told_by(job: Path) -> Path:
    """Return the file that says that a rank of the node has told why the job ends."""
    return job / "told"


def _wait(heard: int, begun: int, message: str, mark: Path) -> None:  # pragma: no cover
    """Watch and listen until the rank has left, one way or the other; never return."""
    try:
        os.setsid()  # signals to the job are not for the witness
        for name in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
            signal.signal(name, signal.SIG_IGN)
        libc = ctypes.CDLL(None)
        watch = libc.inotify_init1(0)
        libc.inotify_add_watch(watch, os.fsencode(mark.parent), _CLOSED | _DELETED)
        kept = {2, heard, begun, watch}
        for number in set(range(max(kept) + 1)) - kept:
            with suppress(OSError):
                os.close(number)
        os.closerange(max(kept) + 1, 4096)
        os.write(begun, b".")
        os.close(begun)
        _listen(heard, watch, message, mark)
    finally:
        os._exit(0)


def _listen(heard: int, watch: int, message: str, mark: Path) -> None:  # pragma: no cover
    """Follow what the rank says; speak for it if it ends without a word."""
    half_written: set[bytes] = set()
    left = False
    with os.fdopen(heard, "rb") as lines:
        for line in lines:
            word, path = line[0], line[1:-1]
            left |= word == LEAVES
            (half_written.add if word == WRITES else half_written.discard)(path)
    first = not left and _first_closed(watch, mark.name) == mark.name
    if first and not _told_by(mark.parent).exists():
        os.write(2, f"sfcpart: error: {message}\n".encode())
    os.dup2(os.open(os.devnull, os.O_RDWR), 2)
    time.sleep(PAUSE)
    for name in map(os.fsdecode, half_written):  # also where a rank left because another died
        shutil.rmtree(name, ignore_errors=True)
        with suppress(OSError):
            Path(name).unlink()
    _clear_away(mark)


def _first_closed(watch: int, own: str) -> str:  # pragma: no cover
    """Return whose file was closed first, of those that had not taken theirs away before."""
    closed: list[str] = []
    deleted: set[str] = set()
    while own not in closed and select.select([watch], [], [], PATIENCE)[0]:
        queue, at = os.read(watch, 1 << 16), 0
        while at < len(queue):
            _, mask, _, length = _EVENT.unpack_from(queue, at)
            at += _EVENT.size + length
            name = queue[at - length : at].rstrip(b"\0").decode()
            if mask & _DELETED:
                deleted.add(name)
            elif name.isdigit() and name not in deleted:
                closed.append(name)
    return closed[0] if closed else own


def _clear_away(mark: Path) -> None:  # pragma: no cover
    """Remove this rank's file; the last of the node removes the folder."""
    with suppress(OSError):
        mark.unlink()
    if not any(entry.name.isdigit() for entry in mark.parent.iterdir()):
        with suppress(OSError):
            _told_by(mark.parent).unlink()
        with suppress(OSError):
            mark.parent.rmdir()
