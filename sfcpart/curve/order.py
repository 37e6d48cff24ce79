"""The order along the curve, over ranks: a sort of the keys, deeper keys where keys are shared."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from itertools import pairwise
from typing import TYPE_CHECKING, cast

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.curve.frame import Curve, Frame
from sfcpart.dtypes import GID, KEY, Array, Int64Array, IntArray, index_dtype
from sfcpart.kernels.curve.radix import put_rows, sorting, survey, take_rows

if TYPE_CHECKING:
    from sfcpart.mesh.mesh import Mesh

__all__ = ["CurveSlice", "curve_order", "curve_slice", "key_slice", "mesh_slice"]

SLACK = 1 / 64
"""Share of an even stretch by which a rank's may be longer or shorter."""


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
    comm = comm or SerialComm()
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
    _kept: dict[str, IntArray] = field(default_factory=dict, init=False, repr=False)

    def __len__(self) -> int:
        """Return the number of cells on this stretch."""
        return int(self.received.sum())

    @property
    def position(self) -> IntArray:
        """Place on the whole curve of each local cell, (n_local,), kept; collective at first."""
        if "position" not in self._kept:  # functools keeps other ranks' threads out meanwhile
            self._kept["position"] = self._positions()
        return self._kept["position"]

    def _positions(self) -> IntArray:
        """Number the places of the curve and bring the numbers home."""
        count = np.array([len(self), len(self)], np.int64)
        first, total = int(self.comm.exscan(count)[0]), int(self.comm.allreduce(count)[0])
        here = np.arange(first, first + len(self), dtype=index_dtype(total))
        return np.asarray(self.scatter(here))

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
    One local sort, at most 63 small reductions (a cell in 64 is not worth more), one exchange, and
    one merge.
    """
    frame = Frame.of(centers, curve, comm)
    line, key = _by_key(frame.keys(), comm)
    n_same = np.array([survey(key).n_equal], np.int64)
    return _untie(line, key, frame) if comm.allreduce(n_same)[0] else line


def key_slice(key: Int64Array, *, comm: Comm) -> CurveSlice:
    """Sort cells by keys of the caller's own, no two alike; each rank gets one stretch.

    Parameters
    ----------
    key : (n_local,) int64
        Distinct over all ranks, >= 0.
    comm : Comm

    Notes
    -----
    As `curve_slice`.
    """
    return _by_key(key, comm)[0]


def mesh_slice(mesh: Mesh, *, curve: Curve = "hilbert", comm: Comm) -> CurveSlice:
    """Return the stretch of the curve through the cell centres of a mesh, kept on the mesh.

    Splitting and writing the parts need the same order; it is found once. Keeps 4 bytes a cell (8
    from 2^31 cells on).
    """
    name = f"slice of the curve {curve}, rank {comm.rank} of {comm.size}"
    return mesh.keep(name, lambda: curve_slice(mesh.centers, curve=curve, comm=comm))


def _by_key(key: Int64Array, comm: Comm) -> tuple[CurveSlice, Int64Array]:
    """Sort by key over all ranks; return the slice, and the keys of this rank's stretch."""
    order, key = sorting(key)
    if order is None:
        order = np.arange(len(key), dtype=index_dtype(len(key)))
    edge = _even_edges(key, comm)
    pieces = comm.alltoall(_cut(key, edge))
    received = np.array([len(piece) for piece in pieces], np.int64)
    merge, key = sorting(_join(pieces))
    return CurveSlice(comm, order, edge, received, merge), key


def _even_edges(key: Int64Array, comm: Comm) -> Int64Array:
    """Cut the sorted local keys where the keys of all ranks fall into `size` even stretches.

    A cut is good enough within `SLACK` of a stretch: which rank sorts a cell changes no answer.
    Each round counts the keys below some probes, spread over the brackets of the cuts not found.
    """
    total = int(comm.allreduce(np.array([len(key)], np.int64))[0])
    wanted = np.array([total * r // comm.size for r in range(1, comm.size)], np.int64)
    slack = int(SLACK * (total // comm.size))
    low, high = np.zeros_like(wanted), np.full_like(wanted, np.iinfo(KEY).max)
    while np.any(low < high):  # the same on all ranks
        probe = _probes(low, high, at_most=comm.size + 62)
        below = comm.allreduce(np.searchsorted(key, probe, side="left").astype(np.int64))
        low, high = _narrowed(low, high, wanted, probe=probe, below=below, slack=slack)
    inner = np.searchsorted(key, low, side="left")
    return np.concatenate(([0], inner, [len(key)])).astype(np.int64)


def _probes(low: Int64Array, high: Int64Array, *, at_most: int) -> Int64Array:
    """Spread keys over the open brackets, the middle of each among them; ascending."""
    bracket = np.unique(np.stack([low, high], axis=1)[low < high], axis=0)
    width = bracket[:, 1] - bracket[:, 0]
    each = max(1, at_most // len(bracket))
    between = bracket[:, :1] + (width // (each + 1))[:, None] * np.arange(1, each + 1)
    return np.unique(np.append(between, bracket[:, 0] + width // 2))


def _narrowed(
    low: Int64Array,
    high: Int64Array,
    wanted: Int64Array,
    *,
    probe: Int64Array,
    below: Int64Array,
    slack: int,
) -> tuple[Int64Array, Int64Array]:
    """Narrow the brackets of the cuts: the least keys with `wanted` keys below, or near enough."""
    first = np.searchsorted(below, wanted, side="left")  # the first probe with enough below
    before, after = np.maximum(first - 1, 0), np.minimum(first, len(probe) - 1)
    is_open = low < high
    low = np.where(is_open & (first > 0), np.maximum(low, probe[before] + 1), low)
    high = np.where(is_open & (first < len(probe)), np.minimum(high, probe[after]), high)
    for at in (before, after):
        fits = is_open & (np.abs(below[at] - wanted) <= slack)
        low, high = np.where(fits, probe[at], low), np.where(fits, probe[at], high)
    return low, high


def _untie(line: CurveSlice, key: Int64Array, frame: Frame) -> CurveSlice:
    """Order the centres that share a key by their deeper keys, asked from their home ranks."""
    same = key[1:] == key[:-1]
    tied = (
        np.flatnonzero(np.append(same, False) | np.append(False, same))
        if len(key)
        else np.empty(0, np.int64)
    )
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


def _cut(array: Array, edge: Int64Array) -> list[Array]:
    """Cut an array into one piece for each rank."""
    return [array[start:stop] for start, stop in pairwise(edge)]


def _join(pieces: Sequence[Array]) -> Array:
    """Put the pieces of all ranks together; a single one is not copied."""
    return pieces[0] if len(pieces) == 1 else np.concatenate(pieces)
