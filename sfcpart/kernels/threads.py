"""Run a kernel over ranges of rows on several threads.

Every kernel that can be threaded takes `(start, stop, ...)` first, works on rows
`start <= i < stop` only and writes to rows (or slots) no other range writes, so the result
cannot depend on the number of threads. `SFCPART_THREADS` sets the number; the default is the
processors this process may use.
"""

from __future__ import annotations

import os
from collections.abc import Callable
from concurrent.futures import ThreadPoolExecutor
from functools import lru_cache
from typing import Any

import numpy as np

from sfcpart.kernels._jit import COMPILED

__all__ = ["n_threads", "ranges", "run_ranges"]


def n_threads() -> int:
    """Return the number of threads kernels may use (>= 1)."""
    asked = os.environ.get("SFCPART_THREADS", "")
    if asked.isdigit() and int(asked) > 0:
        return int(asked)
    return len(os.sched_getaffinity(0)) if hasattr(os, "sched_getaffinity") else os.cpu_count() or 1


def ranges(n: int, *, smallest: int = 16_384) -> list[tuple[int, int]]:
    """Cut `range(n)` into at most `n_threads()` ranges of at least `smallest` rows."""
    count = max(1, min(n_threads(), n // smallest))
    return [(n * i // count, n * (i + 1) // count) for i in range(count)]


def run_ranges(kernel: Callable[..., Any], n: int, *args: Any, smallest: int = 16_384) -> list[Any]:
    """Call `kernel(start, stop, *args)` for each range of `range(n)`; results in range order."""
    if not COMPILED:
        kernel = _quiet(kernel)
    pieces = ranges(n, smallest=smallest)
    if len(pieces) == 1:
        return [kernel(0, n, *args)]
    futures = [_pool(len(pieces)).submit(kernel, lo, hi, *args) for lo, hi in pieces]
    return [future.result() for future in futures]


def _quiet(kernel: Callable[..., Any]) -> Callable[..., Any]:
    """Let a plain Python kernel compute with infinities without a word, as a compiled one does."""

    def call(*args: Any) -> Any:
        with np.errstate(all="ignore"):
            return kernel(*args)

    return call


@lru_cache(maxsize=4)
def _pool(size: int) -> ThreadPoolExecutor:
    """Keep one pool for each number of threads."""
    return ThreadPoolExecutor(size, thread_name_prefix="sfcpart")
