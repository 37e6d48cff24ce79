"""The communicator of MPI processes.

Bulk arrays travel as buffers, never pickled. A row of an array is one MPI datatype of as many
bytes, so every fixed-size dtype and trailing shape works, and counts are counts of rows: 2^31 of
them on any MPI, more where MPI-4's large counts are there (mpi4py >= 4 uses them by itself).

`alltoall` is made of non-blocking messages straight from and into the caller's arrays, empty ones
left out: no send buffer is put together, and a sparse exchange costs what it sends.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from itertools import pairwise
from typing import Any

import numpy as np
from mpi4py import MPI

from sfcpart.comm.base import Direction, Reduction, Stretch
from sfcpart.comm.gate import (
    check_buffers,
    check_root,
    check_stretches,
    movable,
    parcel,
    raise_parcel,
    reducible,
    relayed,
    rooted,
    same_rows,
    summable,
)
from sfcpart.comm.mpi.link import MpiLink
from sfcpart.comm.mpi.rows import as_bytes, counts_of, fingerprint, row_type
from sfcpart.dtypes import Array, Int64Array

__all__ = ["MpiComm"]

_TAG = 1
_RELAY_TAG = 3
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
        mine = np.array([len(array), fingerprint(array)], np.int64)
        heads = np.empty((self.size, 2), np.int64)
        self._comm.Allgather(mine, heads)
        counts = counts_of(heads, array)
        starts = np.concatenate(([0], np.cumsum(counts)))
        result = np.empty((starts[-1], *array.shape[1:]), array.dtype)
        with row_type(array) as row:
            self._comm.Allgatherv(
                [as_bytes(array), len(array), row], [as_bytes(result), (counts, starts[:-1]), row]
            )
        return [result[lo:hi] for lo, hi in pairwise(starts)]

    def bcast(self, array: Array | None, root: int = 0) -> Array:
        """Return the root's array on every rank."""
        check_root(root, self.size)
        sent = rooted(array, root=root, rank=self.rank)
        form = self._comm.bcast(None if sent is None else (sent.shape, sent.dtype), root)
        result = np.empty(*form) if sent is None else sent
        with row_type(result) as row:
            self._comm.Bcast([as_bytes(result), len(result), row], root)
        return result

    def alltoall(self, arrays: Sequence[Array]) -> list[Array]:
        """Send `arrays[r]` to rank r; return what each rank sent here, in rank order."""
        rows = same_rows(arrays, self.size)
        mark = fingerprint(rows[0])
        heads = np.array([(len(array), mark) for array in rows], np.int64)
        theirs = np.empty_like(heads)
        self._comm.Alltoall(heads, theirs)
        counts = counts_of(theirs, rows[0])
        result = [np.empty((n, *rows[0].shape[1:]), rows[0].dtype) for n in counts]
        result[self.rank] = rows[self.rank]
        self._exchange(rows, result)
        return result

    def _exchange(self, rows: list[Array], result: list[Array]) -> None:
        """Receive every array of `result` and send every array of `rows`, but for empty ones."""
        others = [rank for rank in range(self.size) if rank != self.rank]
        with row_type(rows[0]) as row:
            requests = [
                self._comm.Irecv([as_bytes(result[rank]), len(result[rank]), row], rank, _TAG)
                for rank in others
                if result[rank].nbytes
            ]
            requests += [
                self._comm.Isend([as_bytes(rows[rank]), len(rows[rank]), row], rank, _TAG)
                for rank in others
                if rows[rank].nbytes
            ]
            MPI.Request.Waitall(requests)

    def link(
        self,
        sent: Array,
        received: Array,
        *,
        targets: Sequence[Stretch],
        sources: Sequence[Stretch],
    ) -> MpiLink:
        """Set up an exchange between two buffers."""
        check_buffers(sent, received)
        check_stretches(targets, len(sent), self.size)
        check_stretches(sources, len(received), self.size)
        return MpiLink(self._comm, sent, received, targets, sources)

    def bcast_object(self, value: Any, root: int = 0) -> Any:
        """Return the root's small picklable value on every rank."""
        check_root(root, self.size)
        return self._comm.bcast(value, root)

    def relay(
        self, array: Int64Array, step: Callable[[Int64Array], Int64Array], *, towards: Direction
    ) -> Int64Array:
        """Hand an array from rank to rank, each of which makes of it what the next one gets."""
        before, after = (-1, 1) if towards == "last" else (1, -1)
        ends = range(self.size)[::after]
        came, failed = relayed(array), False
        if self.rank != ends[0]:
            status = MPI.Status()
            self._comm.Probe(self.rank + before, _RELAY_TAG, status)  # links have another tag
            box = np.empty(status.Get_count(MPI.INT64_T), np.int64)
            self._comm.Recv(box, self.rank + before, _RELAY_TAG)
            came, failed = box[1:], bool(box[0])
        if not failed:
            came, failed = _stepped(step, came, self.rank)
        box = np.append(np.int64(failed), came)
        if self.rank != ends[-1]:
            self._comm.Send(box, self.rank + after, _RELAY_TAG)
        return self._result_of_relay(box, ends[-1])

    def _result_of_relay(self, box: Int64Array, root: int) -> Int64Array:
        """Spread what the last rank made; raise on all ranks what one of them failed with."""
        length = np.array(len(box), np.int64)
        self._comm.Bcast(length, root)
        made = box if self.rank == root else np.empty(int(length), np.int64)
        self._comm.Bcast(made, root)
        if made[0]:
            raise_parcel(made[2:].tobytes(), None, rank=int(made[1]))
        return made[1:]

    def check(self, error: BaseException | None) -> None:
        """Turn an error of any rank into the same error on all."""
        mine = [self.size, 0] if error is None else [self.rank, 1]
        first, by_all = (int(x) for x in self.allreduce(np.array(mine), "min"))
        if first == self.size:
            return
        packed = parcel(error, first) if error is not None and first == self.rank else None
        raise_parcel(self._comm.bcast(packed, first), error, rank=-1 if by_all else first)


def _stepped(
    step: Callable[[Int64Array], Int64Array], came: Int64Array, rank: int
) -> tuple[Int64Array, bool]:
    """Return what a step makes, or its error packed to travel: rank and parcel, as int64."""
    try:
        return relayed(step(came)), False
    except Exception as error:
        packed = parcel(error, rank)
        packed += bytes(-len(packed) % 8)  # pickle ignores what follows its end
        return np.append(rank, np.frombuffer(packed, np.int64)).astype(np.int64), True
