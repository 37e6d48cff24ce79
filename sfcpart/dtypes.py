"""Array dtypes in one place: constants to create with, aliases to annotate with."""

from __future__ import annotations

from typing import Any, TypeAlias

import numpy as np
from numpy.typing import NDArray

Array: TypeAlias = NDArray[Any]
FloatArray: TypeAlias = NDArray[np.float64]
IntArray: TypeAlias = NDArray[np.signedinteger[Any]]
Int32Array: TypeAlias = NDArray[np.int32]
Int64Array: TypeAlias = NDArray[np.int64]
KindArray: TypeAlias = NDArray[np.uint8]
BoolArray: TypeAlias = NDArray[np.bool_]

COORDINATE = np.float64
PART = np.int32
KEY = np.int64
"""Curve keys: non-negative, 31 bits an axis in 2-D and 21 in 3-D.

Never uint64: numpy turns uint64 with int64 into float64.
"""
GID = np.int64
WEIGHT = np.int64
OFFSET = np.int64
KIND = np.uint8


def index_dtype(n: int) -> type[np.int32] | type[np.int64]:
    """Return the smallest dtype for indices below `n`: int32 where they fit, else int64."""
    return np.int32 if n <= np.iinfo(np.int32).max else np.int64
