"""The most that each part may weigh: its fair share and the tolerance on top."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array

__all__ = ["part_caps"]

_ROUNDING = 1e-12


def part_caps(total: int, speed: FloatArray, tolerance: float) -> Int64Array:
    """Return the most each part may weigh, (n_parts,) int64.

    (1 + tolerance) fair shares, but never less than a fair share rounded up, which whole weights
    may need.

    Parameters
    ----------
    total : int
        Weight of all cells.
    speed : (n_parts,) float64
    tolerance : float

    Examples
    --------
    >>> part_caps(10, np.ones(4), 0.03).tolist()
    [3, 3, 3, 3]
    >>> part_caps(1000, np.array([3.0, 1.0]), 0.1).tolist()
    [825, 275]
    """
    share = total * (speed / speed.sum())
    most = np.floor((1.0 + tolerance) * share * (1.0 + _ROUNDING))
    caps: Int64Array = np.maximum(most, np.ceil(share * (1.0 - _ROUNDING))).astype(np.int64)
    return caps
