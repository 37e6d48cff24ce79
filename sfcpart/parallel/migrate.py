"""Move per-cell arrays, of fixed width or ragged, to the ranks that cells belong to from now on.

How: cells are grouped by destination with a stable sort; what stays is copied, what leaves goes in
rounds of bounded size straight into the arrays that are returned. Ranks exchange the numbers of
moving cells once, so rounds carry nothing but rows.

Memory: the arrays given, the arrays returned, 24 bytes a cell, 24 more a cell while a ragged
array moves, and `chunk_bytes` for rows on their way (or one row a destination, if that is more).
Bytes sent: those of the rows that leave; of a ragged array, its rows and the length of each, in 1,
2, 4 or 8 bytes as the longest needs; beside them 8 bytes a rank once and a few reductions an array.

Source: common practice, no source.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeAlias

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import adopt
from sfcpart.dtypes import OFFSET, Array, Int64Array
from sfcpart.parallel.columns import Ragged, check_bound, checked_columns, refuse_differences
from sfcpart.slices.gate import agreed

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm, Stretch

__all__ = ["migrate"]

_Pack: TypeAlias = Callable[[int, int, Array], None]
"""Copy rows lo to hi of all those in order of destination into a buffer."""
_SCRATCH = 24
"""Bytes a row on its way may need for its place, beside its own."""


def migrate(
    arrays: Mapping[str, Array | Ragged | tuple[ArrayLike, Array]],
    *,
    destination: ArrayLike,
    comm: Any,
    order_by: str | None = None,
    chunk_bytes: int = 1 << 26,
) -> dict[str, Any]:
    """Send every cell's rows to the rank it belongs to from now on; all ranks together.

    Parameters
    ----------
    arrays : mapping of names to arrays or (indptr, data)
        (n_local, ...) of any fixed-size dtype, or ragged. Every rank gives the same names, dtypes
        and trailing shapes in the same order, also a rank without cells.
    destination : (n_local,) integers
        Rank to which each cell goes; those that stay name this rank and are not sent.
    comm : mpi4py communicator, or Comm
    order_by : str, optional
        Name of a whole-number array (of global numbers) by which cells are sorted on arrival.
        By default cells arrive by source rank, and in the source's order from each; those that
        stay stand where their own rank has its turn.
    chunk_bytes : int
        Bytes on their way at once from this rank, and with the places of rows the most scratch
        memory used.

    Returns
    -------
    dict
        Under the same names: arrays, and `Ragged` for ragged ones, in order of arrival.

    Raises
    ------
    InputError
        If lengths differ, a destination is no rank, or ranks disagree about the arrays. All ranks
        raise it alike.

    Notes
    -----
    O(n log n) time for n local cells. With `order_by` each array is copied once more.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> def act(comm):
    ...     gid = np.arange(2) + 2 * comm.rank
    ...     faces = (np.array([0, 1, 3]), 10 * gid[[0, 1, 1]])
    ...     moved = migrate(
    ...         {"gid": gid, "faces": faces}, destination=[1, 0], comm=comm, order_by="gid")
    ...     return moved["gid"].tolist(), moved["faces"].data.tolist()
    >>> run_ranks(2, act)
    [([1, 3], [10, 10, 30, 30]), ([0, 2], [0, 20])]
    """
    comm = adopt(comm)
    columns, goal = agreed(comm, lambda: checked_columns(arrays, destination, order_by, comm.size))
    agreed(comm, lambda: check_bound(chunk_bytes))
    refuse_differences(columns, order_by, chunk_bytes, comm)
    route = _Route.of(goal, comm=comm, chunk_bytes=int(chunk_bytes))
    moved = {name: route.move(column) for name, column in columns.items()}
    if order_by is None:
        return moved
    order = np.argsort(moved[order_by], kind="stable")
    return {name: _reordered(moved.pop(name), order, route.chunk_bytes) for name in columns}


@dataclass(frozen=True, eq=False)
class _Route:
    """Which local cells go where, and how many come from each rank.

    Attributes
    ----------
    comm : Comm
    order : (n_local,) int64
        Local cells by destination, then row.
    edge : (size + 1,) int64
        `order[edge[r]:edge[r + 1]]` go to rank r.
    arrive : (size + 1,) int64
        Rows of the result that come from each rank.
    n_partners : int
        The most destinations of any rank beside itself, at least 1.
    chunk_bytes : int
    """

    comm: Comm
    order: Int64Array
    edge: Int64Array
    arrive: Int64Array
    n_partners: int
    chunk_bytes: int

    @classmethod
    def of(cls, destination: Int64Array, *, comm: Comm, chunk_bytes: int) -> _Route:
        """Group the cells by destination and tell the destinations how many come."""
        order = np.argsort(destination, kind="stable")
        count = np.bincount(destination, minlength=comm.size)
        came = comm.alltoall(list(count.reshape(-1, 1)))
        others = np.count_nonzero(np.delete(count, comm.rank))
        most = int(comm.allreduce(np.array([others]), "max")[0])
        return cls(
            comm, order, _before(count), _before(np.concatenate(came)), max(1, most), chunk_bytes
        )

    def move(self, column: Array | Ragged) -> Array | Ragged:
        """Return what arrives here of an array."""
        if isinstance(column, Ragged):
            return self._move_ragged(column)
        return self._ship(column, self.edge, self.arrive, lambda lo, hi, out: _take(
            column, self.order[lo:hi], out))  # fmt: skip

    def _move_ragged(self, column: Ragged) -> Ragged:
        """Return what arrives of a ragged array: first the lengths of its rows, then the rows."""
        length = np.diff(column.indptr)
        longest = self.comm.allreduce(np.array([length.max(initial=0)]), "max")
        length = length.astype(np.min_scalar_type(int(longest[0])))
        here = self.move(length)
        assert not isinstance(here, Ragged)
        indptr = _before(here)
        rows = _Rows(column, self.order)
        data = self._ship(column.data, rows.before[self.edge], indptr[self.arrive], rows.pack)
        return Ragged(indptr, data)

    def _ship(self, rows: Array, edge: Int64Array, arrive: Int64Array, pack: _Pack) -> Array:
        """Send rows [edge[r], edge[r + 1]) in order of destination to rank r; return what came."""
        result = np.empty((int(arrive[-1]), *rows.shape[1:]), rows.dtype)
        quota = _quota(rows, self.chunk_bytes // self.n_partners)
        own = self.comm.rank
        _pack_in_pieces(pack, edge[own], result[arrive[own] : arrive[own + 1]], quota)
        leave, come = np.diff(edge), np.diff(arrive)
        leave[own] = come[own] = 0
        longest = int(self.comm.allreduce(np.array([leave.max()]), "max")[0])
        for first in range(0, longest, quota):
            targets, n_rows = _turn(leave, first, quota)
            sent = np.empty((n_rows, *rows.shape[1:]), rows.dtype)
            for rank, lo, hi in targets:
                start = int(edge[rank]) + first
                pack(start, start + hi - lo, sent[lo:hi])
            sources = _arrivals(come, arrive, first, quota)
            link = self.comm.link(sent, result, targets=targets, sources=sources)
            link.start()
            link.finish()
        return result


class _Rows:
    """The rows of a ragged array in another order, entry by entry."""

    def __init__(self, column: Ragged, order: Int64Array) -> None:
        self._data = column.data
        self._start = column.indptr[order]
        self.before = _before(np.diff(column.indptr)[order])

    def pack(self, lo: int, hi: int, out: Array) -> None:
        """Copy entries lo to hi of the reordered rows."""
        first = int(np.searchsorted(self.before, lo, side="right")) - 1
        last = int(np.searchsorted(self.before, hi, side="left"))
        if last <= first or hi <= lo:
            return
        inside = np.clip(self.before[first : last + 1], lo, hi)
        place = np.repeat(self._start[first:last] - self.before[first:last], np.diff(inside))
        place += np.arange(lo, hi)
        _take(self._data, place, out)


def _turn(leave: Int64Array, first: int, quota: int) -> tuple[list[Stretch], int]:
    """Return the stretches of the send buffer of one round, and its rows."""
    count = np.clip(leave - first, 0, quota)
    before = _before(count)
    ranks = np.flatnonzero(count).tolist()
    return [(rank, int(before[rank]), int(before[rank + 1])) for rank in ranks], int(before[-1])


def _arrivals(come: Int64Array, arrive: Int64Array, first: int, quota: int) -> list[Stretch]:
    """Return the stretches of the result that one round fills."""
    count = np.clip(come - first, 0, quota)
    ranks = np.flatnonzero(count).tolist()
    start = arrive[:-1] + first
    return [(rank, int(start[rank]), int(start[rank] + count[rank])) for rank in ranks]


def _pack_in_pieces(pack: _Pack, start: int, out: Array, quota: int) -> None:
    """Copy rows that follow each other, a bounded number at a time."""
    for lo in range(0, len(out), quota):
        hi = min(lo + quota, len(out))
        pack(int(start) + lo, int(start) + hi, out[lo:hi])


def _quota(rows: Array, n_bytes: int) -> int:
    """Return how many rows may be on their way within some bytes, at least one."""
    row_bytes = rows.dtype.itemsize * int(np.prod(rows.shape[1:], dtype=np.int64))
    return max(1, n_bytes // (row_bytes + _SCRATCH))


def _take(array: Array, rows: Int64Array, out: Array) -> None:
    """Copy some rows into a C-contiguous buffer."""
    np.take(array, rows, axis=0, out=out, mode="clip")  # "raise" would copy once more


def _before(count: Array) -> Int64Array:
    """Return the sums before each entry and the total."""
    total = np.zeros(len(count) + 1, OFFSET)
    np.cumsum(count, out=total[1:])
    return total


def _reordered(column: Array | Ragged, order: Int64Array, chunk_bytes: int) -> Array | Ragged:
    """Return the rows of a column in another order."""
    if not isinstance(column, Ragged):
        return column[order]
    rows = _Rows(column, order)
    data = np.empty_like(column.data)
    _pack_in_pieces(rows.pack, 0, data, _quota(data, chunk_bytes))
    return Ragged(rows.before, data)
