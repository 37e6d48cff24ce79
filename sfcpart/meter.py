"""Time and peak memory of one call in this process."""

from __future__ import annotations

import ctypes
import gc
import statistics
import time
from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple, TypeVar

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.kernels._jit import count_compiled

__all__ = ["Metered", "metered"]

T = TypeVar("T")

_STATUS = Path("/proc/self/status")
_RESET = Path("/proc/self/clear_refs")


class Metered(NamedTuple):
    """What a call took.

    Attributes
    ----------
    seconds : float
        Wall time, the median if repeated.
    peak_bytes : int or None
        How far the resident memory rose above where it stood; None where the system cannot tell.
    """

    seconds: float
    peak_bytes: int | None


def metered(
    call: Callable[[], T], *, repeat: int = 1, comm: Comm | None = None
) -> tuple[T, Metered]:
    """Call a function and measure it.

    Parameters
    ----------
    call : callable
        Takes nothing, and gives the same each time.
    repeat : int
        How often to measure. A run in which kernels were compiled, or loaded from disk, does not
        count and is repeated.
    comm : Comm, optional
        Ranks that make the call together; what counts is the slowest, and the most memory of one.

    Returns
    -------
    result, Metered
        What the last call returned, and what a call takes. Memory needs Linux's /proc (the peak of
        the resident size, reset before each call), is counted in pages and does not see what other
        threads of the process do meanwhile as theirs.

    Examples
    --------
    >>> result, took = metered(lambda: 6 * 7, repeat=3)
    >>> result, took.seconds >= 0
    (42, True)
    """
    comm = comm or SerialComm()
    known = count_compiled()
    result, took = _once(call, comm)
    if comm.allreduce(np.array([count_compiled() > known]), "max")[0]:
        result, took = _once(call, comm)
    runs = [took]
    for _ in range(repeat - 1):
        del result  # or two of them would be in memory
        result, took = _once(call, comm)
        runs.append(took)
    peaks = [run.peak_bytes for run in runs if run.peak_bytes is not None]
    seconds = statistics.median(run.seconds for run in runs)
    return result, Metered(seconds, max(peaks, default=None))


def _once(call: Callable[[], T], comm: Comm) -> tuple[T, Metered]:
    """Measure one call."""
    before = _resident_at_reset()
    comm.barrier()
    start = time.perf_counter()
    result = call()
    seconds = time.perf_counter() - start
    peak = -1 if before is None else max(0, _status("VmHWM") - before)
    most = float(comm.allreduce(np.array([seconds]), "max")[0])
    peak = int(comm.allreduce(np.array([peak]), "max")[0])
    return result, Metered(most, None if peak < 0 else peak)


def _resident_at_reset() -> int | None:
    """Let the peak count start anew (proc(5): writing 5 to clear_refs) and return where it is."""
    gc.collect()
    _give_back()
    try:
        _RESET.write_text("5")
        return _status("VmRSS")
    except (OSError, LookupError):
        return None


def _give_back() -> None:
    """Return freed memory to the system, or what reuses it would seem to need none (glibc only)."""
    try:
        ctypes.CDLL(None).malloc_trim(0)
    except (AttributeError, OSError, TypeError):
        return  # another C library


def _status(name: str) -> int:
    """Return a line of /proc/self/status in bytes."""
    for line in _STATUS.read_text().splitlines():
        if line.startswith(f"{name}:"):
            return int(line.split()[1]) * 1024
    raise LookupError(name)
