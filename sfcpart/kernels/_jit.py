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
from typing import Any, ParamSpec, TypeVar

__all__ = ["COMPILED", "count_compiled", "jit", "load_for_us_alone"]

P = ParamSpec("P")
R = TypeVar("R")

COMPILED: bool = os.environ.get("SFCPART_COMPILE", "1") != "0"
"""Whether kernels are compiled in this process."""

_kernels: list[Any] = []


def jit(function: Callable[P, R]) -> Callable[P, R]:
    """Compile a kernel on first call (cached, nogil, no fast-math)."""
    if not COMPILED:
        return function
    from numba import njit

    compiled: Callable[P, R] = njit(cache=True, nogil=True, fastmath=False, boundscheck=False)(
        function
    )
    _kernels.append(compiled)
    return compiled


def count_compiled() -> int:
    """Count what was compiled, or loaded from disk, in this process: kernels times types."""
    return sum(len(kernel.signatures) for kernel in _kernels)


def load_for_us_alone() -> None:
    """Load numba without linear algebra, for a process that runs no compiled code but ours.

    numba looks for scipy's BLAS and so loads all of scipy.linalg, which no kernel of ours uses:
    0.25 of the 1.85 s of processor time that a whole split of 10^6 tets takes. A program that
    imports sfcpart may have kernels of its own, so this is for the command line only. Loading it on
    a thread while the mesh is read was tried: two threads that import numpy meet half-made modules.
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
