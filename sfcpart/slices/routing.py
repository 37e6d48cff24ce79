"""Rows on their way between ranks: dealt out, asked for by number, and numbers made compact.

Numbered rows lie on ranks in blocks: rank r holds rows `first[r]` to `first[r + 1] - 1`. Cost: one
local sort by rank, and what is sent.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import GID, OFFSET, Array, Int64Array, IntArray, index_dtype

__all__ = [
    "Dealing",
    "ask_ragged",
    "ask_rows",
    "block_bounds",
    "compact",
    "dealing",
    "gather_rows",
    "hand_out_rows",
    "owner_of",
    "take_ragged",
]

_STRETCH = 1 << 17
_WINDOW = 4  # numbers looked up in a table of at most so many times their count


def block_bounds(n: int, size: int) -> Int64Array:
    """Cut `range(n)` into `size` even blocks: rank r has rows bounds[r] to bounds[r + 1] - 1.

    Parameters
    ----------
    n : int
        Rows: cells, points, or parts.
    size : int
        Ranks.

    Examples
    --------
    >>> block_bounds(10, 4).tolist()
    [0, 2, 5, 7, 10]
    """
    return np.array([n * r // size for r in range(size + 1)], GID)


def owner_of(gid: Array, first: Int64Array) -> Int64Array:
    """Return the rank whose block holds each row, given the bounds of the blocks.

    Examples
    --------
    >>> owner_of(np.array([0, 4, 9]), np.array([0, 2, 2, 10])).tolist()
    [0, 2, 2]
    """
    return np.searchsorted(first, gid, side="right") - 1


class Dealing:
    """Rows that go to ranks, always the same way; made by `dealing`.

    Attributes
    ----------
    order : (n,) int64, or None
        Rows by rank, in their own order within a rank; None if they are sorted so already.
    edge : (size + 1,) int64
        Which of them go to each rank.
    received : (size,) int64
        Rows that came from each rank.
    """

    def __init__(self, comm: Comm, destination: Array) -> None:
        self.comm = comm
        is_sorted = bool(np.all(destination[1:] >= destination[:-1]))
        self.order = None if is_sorted else np.argsort(destination, kind="stable")
        count = np.bincount(destination, minlength=comm.size).astype(np.int64)
        self.edge = np.concatenate(([0], np.cumsum(count)))
        self.received = np.concatenate(comm.alltoall(list(count[:, None])))

    def forward(self, rows: Array) -> Array:
        """Send rows to their ranks; what comes is ordered by rank, then as it was there."""
        sent = rows if self.order is None else rows[self.order]
        return _joined(self.comm.alltoall([sent[a:b] for a, b in pairwise(self.edge)]))

    def forward_ragged(self, indptr: Int64Array, data: Array) -> tuple[Int64Array, Array]:
        """Send rows of different lengths (CSR) to their ranks."""
        if self.order is not None:
            indptr, data = take_ragged(indptr, data, self.order)
        came = self.comm.alltoall([data[indptr[a] : indptr[b]] for a, b in pairwise(self.edge)])
        size = self.comm.alltoall([np.diff(indptr[a : b + 1]) for a, b in pairwise(self.edge)])
        return _offsets(_joined(size)), _joined(came)

    def back_ragged(self, indptr: Int64Array, data: Array) -> tuple[Int64Array, Array]:
        """Send rows of different lengths made for those that came back to where these are from."""
        edge = np.concatenate(([0], np.cumsum(self.received)))
        came = self.comm.alltoall([data[indptr[a] : indptr[b]] for a, b in pairwise(edge)])
        size = self.comm.alltoall([np.diff(indptr[a : b + 1]) for a, b in pairwise(edge)])
        offset, rows = _offsets(_joined(size)), _joined(came)
        if self.order is None:
            return offset, rows
        home = np.empty_like(self.order)
        home[self.order] = np.arange(len(home))
        return take_ragged(offset, rows, home)

    def back(self, rows: Array) -> Array:
        """Send rows made for those that came back to where these are from, in their order."""
        edge = np.concatenate(([0], np.cumsum(self.received)))
        came = _joined(self.comm.alltoall([rows[a:b] for a, b in pairwise(edge)]))
        if self.order is None:
            return came
        home = np.empty_like(came)
        home[self.order] = came
        return home


def dealing(comm: Comm, destination: Array) -> Dealing:
    """Settle which rows go to which rank (collective).

    Parameters
    ----------
    comm : Comm
    destination : (n,) integers
        Rank to which each row goes.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> run_ranks(2, lambda comm: dealing(comm, np.array([1, 0])).forward(
    ...     np.array([10, 20]) + comm.rank).tolist())
    [[20, 21], [10, 11]]
    """
    return Dealing(comm, destination)


def ask_rows(comm: Comm, rows: Array, *, first: Int64Array, gid: Array) -> Array:
    """Return rows by number from the ranks that hold them (collective).

    Parameters
    ----------
    comm : Comm
    rows : (n_local, ...) array
        This rank's block.
    first : (size + 1,) int64
        Bounds of the blocks.
    gid : (n,) integers
        Rows wanted, in any order.

    Examples
    --------
    >>> from sfcpart.comm import SerialComm
    >>> ask_rows(SerialComm(), np.array([5, 6, 7]), first=np.array([0, 3]),
    ...          gid=np.array([2, 0])).tolist()
    [7, 5]
    """
    way = dealing(comm, owner_of(gid, first))
    wanted = way.forward(np.asarray(gid, GID)) - first[comm.rank]
    return way.back(rows[wanted])


def ask_ragged(
    comm: Comm, indptr: Int64Array, data: Array, *, first: Int64Array, gid: Array
) -> tuple[Int64Array, Array]:
    """Return rows of different lengths by number from the ranks that hold them (collective).

    Parameters
    ----------
    comm : Comm
    indptr, data : CSR
        This rank's block.
    first : (size + 1,) int64
        Bounds of the blocks.
    gid : (n,) integers
        Rows wanted, in any order.

    Examples
    --------
    >>> from sfcpart.comm import SerialComm
    >>> offset, found = ask_ragged(SerialComm(), np.array([0, 2, 3]), np.array([5, 6, 7]),
    ...                            first=np.array([0, 2]), gid=np.array([1, 0]))
    >>> offset.tolist(), found.tolist()
    ([0, 1, 3], [7, 5, 6])
    """
    way = dealing(comm, owner_of(gid, first))
    wanted = way.forward(np.asarray(gid, GID)) - first[comm.rank]
    return way.back_ragged(*take_ragged(indptr, data, wanted))


def take_ragged(indptr: Int64Array, data: Array, rows: IntArray) -> tuple[Int64Array, Array]:
    """Return some rows of a CSR relation, in the order given.

    Examples
    --------
    >>> [a.tolist() for a in take_ragged(np.array([0, 1, 3]), np.array([5, 6, 7]), np.array([1]))]
    [[0, 2], [6, 7]]
    """
    first = int(indptr[0])
    n_rows, n_entries = len(indptr) - 1, int(indptr[-1]) - first
    width = n_entries // n_rows if n_rows else 0
    if n_entries == width * n_rows and np.all(np.diff(indptr) == width):
        table = data[first : first + n_entries].reshape(n_rows, width, *data.shape[1:])
        found = table[rows].reshape(-1, *data.shape[1:])
        return np.arange(len(rows) + 1, dtype=OFFSET) * width, found
    offset = _offsets(indptr[rows + 1] - indptr[rows])
    out = np.empty((int(offset[-1]), *data.shape[1:]), data.dtype)
    for a in range(0, len(rows), _STRETCH):  # the numbers of the entries take 8 bytes each
        some = rows[a : a + _STRETCH]
        size = indptr[some + 1] - indptr[some]
        shift = np.repeat(indptr[some] - (np.cumsum(size) - size), size)
        out[offset[a] : offset[a + len(some)]] = data[shift + np.arange(len(shift))]
    return offset, out


def gather_rows(comm: Comm, rows: Array) -> Array:
    """Bring the rows of all ranks to rank 0, in rank order; the others get none (collective).

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> run_ranks(2, lambda comm: gather_rows(comm, np.array([comm.rank])).tolist())
    [[0, 1], []]
    """
    return _joined(comm.alltoall([rows, *[rows[:0]] * (comm.size - 1)]))


def hand_out_rows(comm: Comm, rows: Array, *, n_local: int) -> Array:
    """Give every rank its `n_local` of the rows that rank 0 has, in rank order (collective).

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> run_ranks(2, lambda comm: hand_out_rows(
    ...     comm, np.arange(3 * (comm.rank == 0)), n_local=comm.rank + 1).tolist())
    [[0], [1, 2]]
    """
    counts = np.concatenate(comm.allgather(np.array([n_local], np.int64)))
    edge = np.concatenate(([0], np.cumsum(counts)))
    if comm.rank:
        return comm.alltoall([rows[:0]] * comm.size)[0]
    return comm.alltoall([rows[a:b] for a, b in pairwise(edge)])[0]


def compact(ids: IntArray) -> tuple[Int64Array, IntArray]:
    """Number the values that occur: return them ascending, and the number of each.

    Parameters
    ----------
    ids : (n,) integers >= 0

    Notes
    -----
    O(n) where the values lie close together (a table of at most 4 n), else one sort.

    Examples
    --------
    >>> [array.tolist() for array in compact(np.array([7, 4, 7]))]
    [[4, 7], [1, 0, 1]]
    """
    if not len(ids):
        return np.empty(0, GID), np.empty(0, np.int32)
    low = int(ids.min())
    span = int(ids.max()) - low + 1
    if span > _WINDOW * len(ids):
        gid, number = np.unique(ids, return_inverse=True)
        return gid.astype(GID), number.reshape(-1).astype(index_dtype(len(gid)))
    met = np.zeros(span, np.bool_)
    shifted = ids - ids.dtype.type(low)
    met[shifted] = True
    gid = np.flatnonzero(met).astype(GID, copy=False)
    table = np.empty(span, index_dtype(len(gid)))
    table[gid] = np.arange(len(gid), dtype=table.dtype)
    return gid + low, table[shifted]


def _offsets(size: Array) -> Int64Array:
    """Return where rows of these sizes begin, and where the last ends."""
    return np.concatenate(([0], np.cumsum(size))).astype(OFFSET, copy=False)


def _joined(pieces: list[Array]) -> Array:
    """Put what came together; a single piece is not copied."""
    return pieces[0] if len(pieces) == 1 else np.concatenate(pieces)
