"""A process that outlives a rank, to tell of its death: a rank that a signal kills cannot.

The rank keeps the only writing end of a pipe. Whoever leaves by itself says so there; if the pipe
ends without that word, the rank was killed: its witness says which one, once for all ranks of the
node (the launcher kills the others, which then die as silently), and removes what was being
written. The launcher is not held up: a witness that has spoken lets go of the error stream.

The witness is forked while the rank is small, and does nothing but wait in a read.
"""

from __future__ import annotations

import atexit
import os
import shutil
import signal
import tempfile
import time
from contextlib import suppress
from pathlib import Path

__all__ = ["Witness"]

LEAVES, ABORTS, WRITES, HAS_WRITTEN = b".!+-"
"""First bytes of what a rank says: it ends, it ends the job, a path is half-written, it is not."""
PAUSE = 0.3
"""Seconds in which the launcher kills the ranks that may still write."""
MEMORY = 3.0
"""Seconds for which ranks of a node remember that one of them has told why the job ends."""


class Witness:
    """The rank's side: what it tells its witness.

    Parameters
    ----------
    rank, size : int
        What the message names.

    Examples
    --------
    >>> Witness  # forks: see `tests/mpi/test_faults.py`
    <class 'sfcpart.comm.witness.Witness'>
    """

    def __init__(self, rank: int, size: int) -> None:
        claim = Path(tempfile.gettempdir()) / f".sfcpart-job-{os.getuid()}-{os.getppid()}"
        heard, self._told = os.pipe()
        if os.fork() == 0:  # pragma: no cover - a process of its own, seen by its message
            _wait(heard, f"rank {rank} of {size} was killed by a signal", claim)
        os.close(heard)
        self._claim = claim
        atexit.register(self._tell, LEAVES)

    def is_written(self, path: Path) -> None:
        """Name what is to be removed if the rank is killed."""
        self._tell(WRITES, path)

    def has_written(self, path: Path) -> None:
        """Take a name back."""
        self._tell(HAS_WRITTEN, path)

    def aborts(self) -> None:
        """Say that this rank tells why the job ends: the others will be killed, and know."""
        _claimed(self._claim)
        self._tell(ABORTS)

    def _tell(self, word: int, path: Path | None = None) -> None:
        """Send one line; a witness that is gone does not matter."""
        text = b"" if path is None else os.fsencode(path.absolute())
        with suppress(OSError):
            os.write(self._told, bytes([word]) + text + b"\n")


def _wait(heard: int, message: str, claim: Path) -> None:  # pragma: no cover - in another process
    """Listen until the rank has left, one way or the other; never return."""
    os.setsid()  # signals to the job are not for the witness
    for name in (signal.SIGINT, signal.SIGTERM, signal.SIGHUP):
        signal.signal(name, signal.SIG_IGN)
    os.closerange(0, 2)
    os.closerange(3, heard)
    os.closerange(heard + 1, 4096)
    try:
        _listen(heard, message, claim)
    finally:
        os._exit(0)


def _listen(heard: int, message: str, claim: Path) -> None:  # pragma: no cover - in another process
    """Follow what the rank says; speak for it if it ends without a word."""
    half_written: set[bytes] = set()
    with os.fdopen(heard, "rb") as lines:
        for line in lines:
            word, path = line[0], line[1:-1]
            if word == LEAVES:
                return
            if word == ABORTS:
                _forget(claim)
                return
            (half_written.add if word == WRITES else half_written.discard)(path)
    if first := _claimed(claim):
        os.write(2, f"sfcpart: error: {message}\n".encode())
    os.dup2(os.open(os.devnull, os.O_RDWR), 2)
    time.sleep(PAUSE)
    for left in map(os.fsdecode, half_written):
        shutil.rmtree(left, ignore_errors=True)
        with suppress(OSError):
            Path(left).unlink()
    if first:
        _forget(claim)


def _claimed(claim: Path) -> bool:
    """Tell whether this process is the first of the node's to tell why the job ends."""
    try:
        os.close(os.open(claim, os.O_CREAT | os.O_EXCL, 0o600))
    except FileExistsError:
        return False
    except OSError:
        return True  # where nothing can be written, each speaks for itself
    return True


def _forget(claim: Path) -> None:  # pragma: no cover - in another process
    """Take the mark away when all ranks of the node are gone."""
    os.dup2(os.open(os.devnull, os.O_RDWR), 2)
    time.sleep(MEMORY)
    with suppress(OSError):
        claim.unlink()
