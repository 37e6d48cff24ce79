"""Ranks as MPI processes: the one home of mpi4py.

Bulk arrays travel as buffers, never pickled. A row of an array is one MPI datatype of as many
bytes, so every fixed-size dtype and trailing shape works, and counts are counts of rows: 2^31 of
them on any MPI, more where MPI-4's large counts are there (mpi4py >= 4 uses them by itself).

`alltoall` is made of non-blocking messages straight from and into the caller's arrays, empty ones
left out: no send buffer is put together, and a sparse exchange costs what it sends.
"""

from __future__ import annotations

import zlib
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from itertools import pairwise
from typing import Any

import numpy as np
from mpi4py import MPI

from sfcpart.comm.base import Reduction
from sfcpart.comm.gate import (
    check_root,
    movable,
    parcel,
    raise_parcel,
    reducible,
    rooted,
    row_form,
    same_rows,
    summable,
)
from sfcpart.dtypes import Array, Int64Array
from sfcpart.errors import RankError

__all__ = ["MpiComm"]

_TAG = 1
_OPERATION = {"sum": MPI.SUM, "min": MPI.MIN, "max": MPI.MAX}


class MpiComm:
    """MPI processes (`sfcpart.comm.base.Comm` has the contract).

    Parameters
    ----------
    communicator : mpi4py.MPI.Intracomm, optional
        The processes that work together; all of MPI_COMM_WORLD by default. It is duplicated, so
        that no message can meet one of the caller's; every process of it must therefore make its
        `MpiComm` at the same point. Make one and keep it.
    """

    def __init__(self, communicator: Any = None) -> None:
        self._comm = (MPI.COMM_WORLD if communicator is None else communicator).Dup()

    @property
    def rank(self) -> int:
        """Number of this rank."""
        return int(self._comm.Get_rank())

    @property
    def size(self) -> int:
        """Number of ranks."""
        return int(self._comm.Get_size())

    def barrier(self) -> None:
        """Return once every rank has arrived."""
        self._comm.Barrier()

    def allreduce(self, array: Array, op: Reduction = "sum") -> Array:
        """Combine equal-shaped arrays elementwise; every rank gets the result."""
        array = np.ascontiguousarray(reducible(array, op)).reshape(np.shape(array))
        if array.dtype.kind == "f":
            return self._float_extreme(array, op)
        plain = array.view(np.uint8) if array.dtype.kind == "b" else array
        result = np.empty_like(plain)
        self._comm.Allreduce(plain, result, op=_OPERATION[op])
        return result.view(array.dtype)

    def _float_extreme(self, array: Array, op: Reduction) -> Array:
        """Reduce floats here, not in MPI, whose minimum of a NaN depends on the order."""
        stacked = np.stack(self.allgather(array[np.newaxis]))[:, 0]
        combine = np.minimum if op == "min" else np.maximum
        return np.asarray(combine.reduce(stacked, axis=0))

    def exscan(self, array: Array) -> Array:
        """Return the elementwise sum over lower ranks (zeros on rank 0)."""
        array = np.ascontiguousarray(summable(array)).reshape(np.shape(array))
        result = np.zeros_like(array)
        self._comm.Exscan(array, result, op=MPI.SUM)
        if self.rank == 0:
            result[...] = 0  # MPI leaves it undefined there
        return result

    def allgather(self, array: Array) -> list[Array]:
        """Return the arrays of all ranks in rank order."""
        array = movable(array)
        mine = np.array([len(array), _fingerprint(array)], np.int64)
        heads = np.empty((self.size, 2), np.int64)
        self._comm.Allgather(mine, heads)
        counts = _counts(heads, array)
        starts = np.concatenate(([0], np.cumsum(counts)))
        result = np.empty((starts[-1], *array.shape[1:]), array.dtype)
        with _row_type(array) as row:
            self._comm.Allgatherv(
                [_bytes(array), len(array), row], [_bytes(result), (counts, starts[:-1]), row]
            )
        return [result[lo:hi] for lo, hi in pairwise(starts)]

    def bcast(self, array: Array | None, root: int = 0) -> Array:
        """Return the root's array on every rank."""
        check_root(root, self.size)
        sent = rooted(array, root=root, rank=self.rank)
        form = self._comm.bcast(None if sent is None else (sent.shape, sent.dtype), root)
        result = np.empty(*form) if sent is None else sent
        with _row_type(result) as row:
            self._comm.Bcast([_bytes(result), len(result), row], root)
        return result

    def alltoall(self, arrays: Sequence[Array]) -> list[Array]:
        """Send `arrays[r]` to rank r; return what each rank sent here, in rank order."""
        rows = same_rows(arrays, self.size)
        mark = _fingerprint(rows[0])
        heads = np.array([(len(array), mark) for array in rows], np.int64)
        theirs = np.empty_like(heads)
        self._comm.Alltoall(heads, theirs)
        counts = _counts(theirs, rows[0])
        result = [np.empty((n, *rows[0].shape[1:]), rows[0].dtype) for n in counts]
        result[self.rank] = rows[self.rank]
        self._exchange(rows, result)
        return result

    def _exchange(self, rows: list[Array], result: list[Array]) -> None:
        """Receive every array of `result` and send every array of `rows`, but for empty ones."""
        others = [rank for rank in range(self.size) if rank != self.rank]
        with _row_type(rows[0]) as row:
            requests = [
                self._comm.Irecv([_bytes(result[rank]), len(result[rank]), row], rank, _TAG)
                for rank in others
                if result[rank].nbytes
            ]
            requests += [
                self._comm.Isend([_bytes(rows[rank]), len(rows[rank]), row], rank, _TAG)
                for rank in others
                if rows[rank].nbytes
            ]
            MPI.Request.Waitall(requests)

    def bcast_object(self, value: Any, root: int = 0) -> Any:
        """Return the root's small picklable value on every rank."""
        check_root(root, self.size)
        return self._comm.bcast(value, root)

    def check(self, error: BaseException | None) -> None:
        """Turn an error of any rank into the same error on all."""
        failed = self.size if error is None else self.rank
        first = int(self.allreduce(np.array(failed), "min"))
        if first == self.size:
            return
        packed = parcel(error, first) if error is not None and first == self.rank else None
        raise_parcel(self._comm.bcast(packed, first), error)


@contextmanager
def _row_type(array: Array) -> Iterator[MPI.Datatype]:
    """Make the MPI datatype of one row of an array."""
    n_bytes = array.dtype.itemsize * int(np.prod(array.shape[1:], dtype=np.int64))
    row = MPI.BYTE.Create_contiguous(n_bytes).Commit()
    try:
        yield row
    finally:
        row.Free()


def _bytes(array: Array) -> Array:
    """View a contiguous array as bytes."""
    return array.reshape(-1).view(np.uint8)


def _fingerprint(array: Array) -> int:
    """Hash the dtype and trailing shape, to tell when ranks disagree about them."""
    return zlib.crc32(row_form(array).encode())


def _counts(heads: Int64Array, array: Array) -> Int64Array:
    """Return the row counts in `heads`; an error on all ranks if some rank's rows differ."""
    if np.any(heads[:, 1] != heads[0, 1]):
        raise RankError(
            f"ranks exchange rows of different form (this one {row_form(array)}); "
            "wanted one dtype and trailing shape"
        )
    return heads[:, 0].copy()
