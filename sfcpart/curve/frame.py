"""Centres in the box that turns them into integers, and the keys of these integers.

Cost: two passes over the centres, one for the box and one for the keys.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm.base import Comm
from sfcpart.dtypes import COORDINATE, GID, KEY, FloatArray, Int64Array, IntArray
from sfcpart.errors import InputError
from sfcpart.kernels.curve import hilbert
from sfcpart.kernels.threads import run_ranges

__all__ = ["CURVES", "Curve", "Frame"]

Curve = Literal["hilbert", "morton", "rows"]
CURVES: tuple[Curve, ...] = ("hilbert", "morton", "rows")

_ALL = np.empty(0, np.int64)
"""Selects all rows."""


@dataclass(frozen=True, eq=False)
class Frame:
    """Centres with the box and the scale that turn them into integers."""

    centers: FloatArray
    curve: Curve
    axes: Int64Array
    low: FloatArray
    scale: float

    @classmethod
    def of(cls, centers: ArrayLike, curve: Curve, comm: Comm) -> Frame:
        """Check the centres and find the box around those of all ranks."""
        error, array = None, np.empty((0, 0))
        try:
            if curve not in CURVES:
                raise InputError(f"curve {curve!r} is unknown; wanted one of {', '.join(CURVES)}")
            array = _checked(centers)
        except InputError as caught:
            error = caught
        comm.check(error)
        bounds = np.array(run_ranges(hilbert.bounds_range, len(array), array))
        first_gid = int(comm.exscan(np.array([len(array)], GID))[0])
        comm.check(_not_finite(array, first_gid) if np.isnan(bounds).any() else None)
        bounds = np.stack([bounds[:, 0].min(axis=0), bounds[:, 1].max(axis=0)])
        low, high = comm.allreduce(bounds[0], "min"), comm.allreduce(bounds[1], "max")
        return cls._fitted(array, curve, low, high)

    @classmethod
    def _fitted(cls, array: FloatArray, curve: Curve, low: FloatArray, high: FloatArray) -> Frame:
        """Choose axes and scale; coordinates near the ends of the float range are scaled first."""
        axes = np.flatnonzero(high > low)
        if not len(axes):
            return cls(array, curve, axes, low, 1.0)
        with np.errstate(over="ignore"):
            extent = float((high[axes] - low[axes]).max())
        if not 1e-280 < extent < np.inf:
            power = -2 if extent > 1 else -int(np.frexp(extent)[1])
            array, low, high = (np.ldexp(values, power) for values in (array, low, high))
        bits = hilbert.BITS[len(axes)]
        most = np.nextafter(2.0**bits, 0) if bits > 52 else 2.0**bits - 1
        scale = most / float((high[axes] - low[axes]).max())
        return cls(array, curve, axes, low[axes], scale)

    def keys(self) -> Int64Array:
        """Return the key of every centre."""
        return self._keys(len(self.centers), _ALL, 0)

    def deeper_keys(self, rows: IntArray) -> Int64Array:
        """Return the next bits of the keys of some centres."""
        return self._keys(len(rows), rows.astype(np.int64), 1)

    def _keys(self, n: int, rows: Int64Array, deeper: int) -> Int64Array:
        """Return keys of `rows` (empty: all n), or their next bits."""
        key = np.zeros(n, KEY)
        if n == 0 or len(self.axes) == 0:
            return key
        if self.curve == "rows" or len(self.axes) == 1:
            return self._row_keys(rows if len(rows) else slice(None), deeper)
        kernel = hilbert.key_range_2d if len(self.axes) == 2 else hilbert.key_range_3d
        table, first = hilbert.curve_table(self.curve, len(self.axes))
        given = (self.centers, self.axes, self.low, self.scale, table, first, rows, deeper, key)
        run_ranges(kernel, n, *given)
        return key

    def _row_keys(self, rows: Int64Array | slice, deeper: int) -> Int64Array:
        """Return the integer coordinates one after the other, the last axis first."""
        bits = hilbert.BITS[len(self.axes)]
        key: Int64Array | None = None
        for axis, low in zip(self.axes[::-1], self.low[::-1], strict=True):
            x = (self.centers[rows, axis] - low) * self.scale
            whole = x.astype(KEY)
            if deeper:
                whole = ((x - whole) * 2.0 ** min(bits, 31)).astype(KEY)
            key = whole if key is None else key << bits | whole
        assert key is not None
        return key


def _checked(centers: ArrayLike) -> FloatArray:
    """Return centres as (n, dim) float64 rows."""
    array = np.ascontiguousarray(centers, COORDINATE)
    if array.ndim != 2 or not 1 <= array.shape[1] <= 3:
        raise InputError(
            f"centers has shape {array.shape}; wanted one row a cell, (n, dim) with dim 1 to 3"
        )
    return array


def _not_finite(array: FloatArray, first_gid: int) -> InputError:
    """Return an error that names the first coordinate that is not finite."""
    row, axis = np.argwhere(~np.isfinite(array))[0]
    return InputError(
        f"centre {first_gid + row} has {array[row, axis]} on axis {axis}; "
        "coordinates must be finite"
    )
