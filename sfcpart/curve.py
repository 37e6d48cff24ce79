"""Curve keys and curve order of cell centres: Hilbert, and two baselines.

Centres are scaled alike on every axis from their bounding box to integers of 31 bits an axis in
2-D and 21 in 3-D, and numbered along the curve. Axes on which all centres agree are left out, so
a flat mesh in 3-D gets 2-D keys, and a straight one 62-bit positions.

- "hilbert": Hilbert's curve; in 3-D the reflected-Gray-code curve of J. Skilling (AIP Conf. Proc.
  707, 381 (2004)), one of 10,694,807 that share the defining properties of the 2-D curve
  (H. Haverkort, arXiv:1109.2323). The first axis has the most significant bit of a digit.
- "morton": the bits of the axes interleaved (Z-order), the first axis most significant.
- "rows": row after row: by the last axis, then the one before, so strips (slabs) in the end.

Centres that share a key are ordered by a deeper key, the next 21 bits an axis in 3-D (28 in 2-D:
all a double holds), computed only for them, and then by cell number.

Translating all centres by an amount that leaves them exact (a dyadic one), or scaling them by a
power of two, changes no key: `(x - low) * ((2**bits - 1) / extent)` rounds alike.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, Literal, cast

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import (
    COORDINATE,
    GID,
    KEY,
    Array,
    FloatArray,
    Int64Array,
    IntArray,
    index_dtype,
)
from sfcpart.errors import InputError
from sfcpart.kernels import hilbert
from sfcpart.kernels.radix import put_rows, sorting, survey, take_rows
from sfcpart.kernels.threads import run_ranges

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["CURVES", "Curve", "CurveSlice", "curve_keys", "curve_order", "curve_slice"]

Curve = Literal["hilbert", "morton", "rows"]
CURVES: tuple[Curve, ...] = ("hilbert", "morton", "rows")

_ALL = np.empty(0, np.int64)
"""Selects all rows."""


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
    return _Frame.of(centers, curve, comm or _alone()).keys()


def curve_order(
    centers: ArrayLike, *, curve: Curve = "hilbert", comm: Comm | None = None
) -> Int64Array:
    """Return the cells in the order in which the curve meets their centres.

    Parameters
    ----------
    centers : (n, dim) float64
    curve : {"hilbert", "morton", "rows"}
    comm : Comm, optional
        Ranks that hold consecutive slices of the cells.

    Returns
    -------
    (n,) int64
        Cell numbers by key, deeper key, cell number; with several ranks, the (global) numbers of
        this rank's slice of the curve.

    Raises
    ------
    InputError
        As `curve_keys`.

    Examples
    --------
    >>> curve_order([[0.0, 0.0], [1.0, 1.0], [1.0, 0.0], [0.0, 1.0]]).tolist()
    [0, 3, 1, 2]
    """
    comm = comm or _alone()
    line = curve_slice(centers, curve=curve, comm=comm)
    first = comm.exscan(np.array([len(line.order)], GID))[0]
    return cast(Int64Array, line.forward(line.order + first))


@dataclass(frozen=True, eq=False)
class CurveSlice:
    """A rank's stretch of the curve, and the way there and back for values of cells.

    Attributes
    ----------
    comm : Comm
    order : (n_local,) int32 or int64
        Local cells by key.
    edge : (size + 1,) int64
        `order[edge[r]:edge[r + 1]]` went to rank r.
    received : (size,) int64
        Cells that came from each rank.
    merge : (n_slice,) int32 or int64, or None
        Curve order of what was received; None if it came in order.
    """

    comm: Comm
    order: IntArray
    edge: Int64Array
    received: Int64Array
    merge: IntArray | None

    def __len__(self) -> int:
        """Return the number of cells on this stretch."""
        return int(self.received.sum())

    def gather(self, values: Array) -> Array:
        """Bring one value a local cell to the curve: (n_local,) -> (n_slice,) in curve order."""
        return self.forward(take_rows(values, self.order))

    def forward(self, values: Array) -> Array:
        """Bring values that are in local curve order already to the curve."""
        came = _join(self.comm.alltoall(_cut(values, self.edge)))
        return came if self.merge is None else take_rows(came, self.merge)

    def scatter(self, values: Array) -> Array:
        """Bring one value a place on the curve home: (n_slice,) -> (n_local,) in cell order."""
        sent = values if self.merge is None else put_rows(values, self.merge)
        edge = np.concatenate(([0], np.cumsum(self.received)))
        return put_rows(_join(self.comm.alltoall(_cut(sent, edge))), self.order)


def curve_slice(centers: ArrayLike, *, curve: Curve = "hilbert", comm: Comm) -> CurveSlice:
    """Sort the centres of all ranks along the curve; each rank gets one stretch of it.

    Stretches are cut at keys, so that centres that share a key share a rank, as evenly as that
    allows. Each rank holds its own cells and its stretch, nothing longer.

    Parameters
    ----------
    centers : (n_local, dim) float64
        Ranks hold consecutive slices of the cells.
    curve : {"hilbert", "morton", "rows"}
    comm : Comm

    Notes
    -----
    One local sort, 63 small reductions, one exchange, and one merge.
    """
    frame = _Frame.of(centers, curve, comm)
    key = frame.keys()
    order, key = sorting(key)
    if order is None:
        order = np.arange(len(key), dtype=index_dtype(len(key)))
    edge = _even_edges(key, comm)
    pieces = comm.alltoall(_cut(key, edge))
    received = np.array([len(piece) for piece in pieces], np.int64)
    merge, key = sorting(_join(pieces))
    line = CurveSlice(comm, order, edge, received, merge)
    n_same = np.array([survey(key).n_equal], np.int64)
    return _untie(line, key, frame) if comm.allreduce(n_same)[0] else line


def _even_edges(key: Int64Array, comm: Comm) -> Int64Array:
    """Cut the sorted local keys where the keys of all ranks fall into `size` even stretches."""
    total = int(comm.allreduce(np.array([len(key)], np.int64))[0])
    wanted = np.array([total * r // comm.size for r in range(1, comm.size)], np.int64)
    low, high = np.zeros_like(wanted), np.full_like(wanted, np.iinfo(KEY).max)
    while np.any(low < high):  # the same on all ranks
        middle = low + (high - low) // 2
        below = comm.allreduce(np.searchsorted(key, middle, side="left").astype(np.int64))
        enough = below >= wanted
        high = np.where(enough, middle, high)
        low = np.where(enough, low, middle + 1)
    inner = np.searchsorted(key, low, side="left")
    return np.concatenate(([0], inner, [len(key)])).astype(np.int64)


def _untie(line: CurveSlice, key: Int64Array, frame: _Frame) -> CurveSlice:
    """Order the centres that share a key by their deeper keys, asked from their home ranks."""
    same = key[1:] == key[:-1]
    tied = np.flatnonzero(np.append(same, False) | np.append(False, same)) if len(key) else _ALL
    came = np.arange(len(key)) if line.merge is None else line.merge.astype(np.int64)
    start = np.cumsum(line.received) - line.received
    asked = came[tied]
    home = np.searchsorted(start + line.received, asked, side="right")
    by_home = np.argsort(home, kind="stable")
    count = np.bincount(home, minlength=line.comm.size)
    place = (asked - start[home])[by_home]
    wanted = line.comm.alltoall(_cut(place, np.concatenate(([0], np.cumsum(count)))))
    deep = [frame.deeper_keys(line.order[line.edge[r] + rows]) for r, rows in enumerate(wanted)]
    answer = np.empty(len(tied), KEY)
    answer[by_home] = _join(line.comm.alltoall(deep))
    came[tied] = came[tied[np.lexsort((answer, key[tied]))]]
    came = came.astype(index_dtype(len(came)))
    return CurveSlice(line.comm, line.order, line.edge, line.received, came)


@dataclass(frozen=True, eq=False)
class _Frame:
    """Centres with the box and the scale that turn them into integers."""

    centers: FloatArray
    curve: Curve
    axes: Int64Array
    low: FloatArray
    scale: float

    @classmethod
    def of(cls, centers: ArrayLike, curve: Curve, comm: Comm) -> _Frame:
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
    def _fitted(cls, array: FloatArray, curve: Curve, low: FloatArray, high: FloatArray) -> _Frame:
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


def _alone() -> Comm:
    """Return the communicator of this process alone."""
    from sfcpart.comm import SerialComm

    return SerialComm()


def _cut(array: Array, edge: Int64Array) -> list[Array]:
    """Cut an array into one piece for each rank."""
    return [array[start:stop] for start, stop in pairwise(edge)]


def _join(pieces: Sequence[Array]) -> Array:
    """Put the pieces of all ranks together; a single one is not copied."""
    return pieces[0] if len(pieces) == 1 else np.concatenate(pieces)
