"""The one home of numba: a decorator that fixes the flags, and its off switch.

Kernels are compiled on first call, cached on disk, release the interpreter lock and keep
IEEE arithmetic (no fast-math), so that a result does not depend on vector width or threads.
`SFCPART_COMPILE=0` in the environment runs every kernel as plain Python (for coverage and
debugging).
"""

from __future__ import annotations

import os
from collections.abc import Callable
from typing import ParamSpec, TypeVar

__all__ = ["COMPILED", "jit"]

P = ParamSpec("P")
R = TypeVar("R")

COMPILED: bool = os.environ.get("SFCPART_COMPILE", "1") != "0"
"""Whether kernels are compiled in this process."""


def jit(function: Callable[P, R]) -> Callable[P, R]:
    """Compile a kernel on first call (cached, nogil, no fast-math)."""
    if not COMPILED:
        return function
    from numba import njit

    compiled: Callable[P, R] = njit(cache=True, nogil=True, fastmath=False, boundscheck=False)(
        function
    )
    return compiled
