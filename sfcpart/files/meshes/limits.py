"""Limits on readers that are not ours: time they may take, memory they may ask for.

Damaged files make some of them loop at the end of the file, or ask for memory by a number that
stands in the file.
"""

from __future__ import annotations

import contextlib
import ctypes
import threading
from collections.abc import Iterator
from pathlib import Path

__all__ = ["OutOfTimeError", "interrupted_after", "memory_limited"]

# Readers of text hold words as Python objects: up to about 40 bytes for a byte of the file.
_BYTES_A_BYTE = 64
_ROOM = 2 << 30
_FILES_OF_PARTS = (".xdmf", ".xmf", ".e", ".exo", ".ex2")


class OutOfTimeError(Exception):
    """Raised in a reader that does not come back."""


@contextlib.contextmanager
def interrupted_after(seconds: float) -> Iterator[None]:
    """Raise `OutOfTimeError` in the block if it runs longer (some readers loop at a file's end).

    Works on Python code only, which is where these readers loop.
    """
    reader = threading.get_ident()
    done = threading.Event()

    def watch() -> None:
        if not done.wait(seconds):
            ctypes.pythonapi.PyThreadState_SetAsyncExc(
                ctypes.c_ulong(reader), ctypes.py_object(OutOfTimeError)
            )

    watcher = threading.Thread(target=watch, daemon=True, name="sfcpart-patience")
    watcher.start()
    try:
        yield
    finally:
        done.set()
        watcher.join()


@contextlib.contextmanager
def memory_limited(path: Path) -> Iterator[None]:
    """Make requests for far more memory than a file can fill fail with MemoryError in the block.

    The limit is on address space and holds for the whole process while the block runs: 2 GB
    and 64 bytes for each byte of the file (packed files: 512). Formats that name further files
    are not limited, nor are systems without such limits.
    """
    try:
        import resource

        pages = int(Path("/proc/self/statm").read_text().split()[0])
    except (ImportError, OSError):
        yield
        return
    soft, hard = resource.getrlimit(resource.RLIMIT_AS)
    most = _BYTES_A_BYTE * path.stat().st_size * (8 if path.suffix == ".gz" else 1)
    wanted = pages * resource.getpagesize() + _ROOM + most
    if path.suffix.lower() in _FILES_OF_PARTS or (soft != resource.RLIM_INFINITY and soft < wanted):
        yield
        return
    resource.setrlimit(resource.RLIMIT_AS, (wanted, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_AS, (soft, hard))
