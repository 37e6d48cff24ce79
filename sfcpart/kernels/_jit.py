"""The one home of numba: a decorator that fixes the flags, and its off switch.

Kernels are compiled on first call, cached on disk, release the interpreter lock and keep
IEEE arithmetic (no fast-math), so that a result does not depend on vector width or threads.
`SFCPART_COMPILE=0` in the environment runs every kernel as plain Python (for coverage and
debugging).
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable
from threading import Thread
from typing import Any, ParamSpec, TypeVar

__all__ = ["COMPILED", "count_compiled", "jit", "load_meanwhile"]

P = ParamSpec("P")
R = TypeVar("R")

COMPILED: bool = os.environ.get("SFCPART_COMPILE", "1") != "0"
"""Whether kernels are compiled in this process."""

_kernels: list[Any] = []
_loading: list[Thread] = []


def jit(function: Callable[P, R]) -> Callable[P, R]:
    """Compile a kernel on first call (cached, nogil, no fast-math)."""
    if not COMPILED:
        return function
    for thread in _loading:
        thread.join()
    from numba import njit

    compiled: Callable[P, R] = njit(cache=True, nogil=True, fastmath=False, boundscheck=False)(
        function
    )
    _kernels.append(compiled)
    return compiled


def count_compiled() -> int:
    """Count what was compiled, or loaded from disk, in this process: kernels times types."""
    return sum(len(kernel.signatures) for kernel in _kernels)


def load_meanwhile() -> None:
    """Load numba on a thread, as `_load_for_us_alone`; the first kernel waits for it.

    A file can be read meanwhile: 0.3 of the 1.75 s that a whole split of 10^6 tets takes.
    """
    if not _loading:
        _loading.append(Thread(target=_load_for_us_alone, name="sfcpart-numba", daemon=True))
        _loading[0].start()


def _load_for_us_alone() -> None:
    """Load numba without linear algebra, for a process that runs no compiled code but ours.

    numba looks for scipy's BLAS and so loads all of scipy.linalg, which no kernel of ours uses:
    0.25 of the 1.85 s of processor time that a whole split of 10^6 tets takes. A program that
    imports sfcpart may have kernels of its own, so this is for the command line only.
    """
    name = "scipy.linalg.cython_blas"
    modules: dict[str, Any] = sys.modules  # None in it means "not there"
    if not COMPILED or name in modules:
        return
    modules[name] = None
    try:
        import numba.np.arraymath  # noqa: F401
    finally:
        del modules[name]
