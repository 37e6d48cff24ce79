"""Time and peak memory of one call in this process."""

from __future__ import annotations

import time
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

__all__ = ["metered"]

T = TypeVar("T")

_STATUS = Path("/proc/self/status")
_RESET = Path("/proc/self/clear_refs")


def metered(call: Callable[[], T]) -> tuple[T, float, int | None]:
    """Call a function and measure it.

    Parameters
    ----------
    call : callable
        Takes nothing.

    Returns
    -------
    result, seconds, peak_bytes
        Wall time, and how far the resident memory rose above where it stood; None where the
        system cannot tell (it needs Linux's /proc).

    Examples
    --------
    >>> result, seconds, peak_bytes = metered(lambda: 6 * 7)
    >>> result, seconds >= 0
    (42, True)
    """
    before = _resident_at_reset()
    start = time.perf_counter()
    result = call()
    seconds = time.perf_counter() - start
    return result, seconds, None if before is None else max(0, _status("VmHWM") - before)


def _resident_at_reset() -> int | None:
    """Let the peak count start anew (proc(5): writing 5 to clear_refs) and return where it is."""
    try:
        _RESET.write_text("5")
        return _status("VmRSS")
    except (OSError, LookupError):
        return None


def _status(name: str) -> int:
    """Return a line of /proc/self/status in bytes."""
    for line in _STATUS.read_text().splitlines():
        if line.startswith(f"{name}:"):
            return int(line.split()[1]) * 1024
    raise LookupError(name)
