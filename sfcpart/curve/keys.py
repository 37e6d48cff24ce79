"""Curve keys of centres, alone or over ranks."""

from __future__ import annotations

from numpy.typing import ArrayLike

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.curve.frame import Curve, Frame
from sfcpart.dtypes import Int64Array

__all__ = ["curve_keys"]


def curve_keys(
    centers: ArrayLike, *, curve: Curve = "hilbert", comm: Comm | None = None
) -> Int64Array:
    """Return the curve key of each centre.

    Parameters
    ----------
    centers : (n, dim) float64
        Cell centres, dim 1 to 3; with `comm`, this rank's.
    curve : {"hilbert", "morton", "rows"}
    comm : Comm, optional
        Ranks whose centres share one bounding box; this process alone by default.

    Returns
    -------
    (n,) int64
        Non-negative; 31 bits an axis in 2-D, 21 in 3-D.

    Raises
    ------
    InputError
        If the shape or the curve is unknown or a coordinate is not finite.

    Notes
    -----
    Time O(n), two passes over the centres.

    Examples
    --------
    >>> curve_keys([[0.0, 0.0], [0.0, 1.0], [1.0, 1.0], [1.0, 0.0]]).argsort().tolist()
    [0, 1, 2, 3]
    """
    return Frame.of(centers, curve, comm or SerialComm()).keys()
