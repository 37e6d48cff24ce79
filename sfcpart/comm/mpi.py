"""Ranks as MPI processes: the one home of mpi4py.

Bulk arrays travel as buffers, never pickled. A row of an array is one MPI datatype of as many
bytes, so every fixed-size dtype and trailing shape works, and counts are counts of rows: 2^31 of
them on any MPI, more where MPI-4's large counts are there (mpi4py >= 4 uses them by itself).

`alltoall` is made of non-blocking messages straight from and into the caller's arrays, empty ones
left out: no send buffer is put together, and a sparse exchange costs what it sends.
"""

from __future__ import annotations

import weakref
import zlib
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from functools import lru_cache
from itertools import pairwise
from typing import Any, ClassVar

import numpy as np
from mpi4py import MPI

from sfcpart.comm.base import Reduction, Stretch
from sfcpart.comm.gate import (
    check_buffers,
    check_root,
    check_stretches,
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
from sfcpart.errors import InputError, RankError

__all__ = ["MpiComm", "adopted"]

_TAG = 1
_LINK_TAG = 2
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

    def link(
        self,
        sent: Array,
        received: Array,
        *,
        targets: Sequence[Stretch],
        sources: Sequence[Stretch],
    ) -> _MpiLink:
        """Set up an exchange between two buffers."""
        check_buffers(sent, received)
        check_stretches(targets, len(sent), self.size)
        check_stretches(sources, len(received), self.size)
        return _MpiLink(self._comm, sent, received, targets, sources)

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


def adopted(communicator: Any) -> MpiComm:
    """Return the `MpiComm` over a communicator of mpi4py: made once, then found again.

    It is kept with the communicator (as an attribute, MPI's own way) and freed with it. The first
    call with a communicator is collective.
    """
    if communicator == MPI.COMM_NULL or communicator.Is_inter():
        raise InputError(
            "a communicator without ranks or between groups; wanted one group of ranks"
        )
    key = _attribute()
    mine: MpiComm | None = communicator.Get_attr(key)
    if mine is None:
        mine = MpiComm(communicator)
        communicator.Set_attr(key, mine)
    return mine


@lru_cache(maxsize=1)
def _attribute() -> int:
    """Return the key under which communicators keep their `MpiComm`."""
    return int(MPI.Comm.Create_keyval(delete_fn=lambda comm, key, mine: mine._comm.Free()))


class _MpiLink:
    """A link of persistent requests (`sfcpart.comm.base.Link`)."""

    def __init__(
        self,
        comm: MPI.Intracomm,
        sent: Array,
        received: Array,
        targets: Sequence[Stretch],
        sources: Sequence[Stretch],
    ) -> None:
        row, sends, receives = _committed_row(sent), _bytes(sent), _bytes(received)
        self._row_bytes = row.Get_size()

        def part(buffer: Array, lo: int, hi: int) -> tuple[Array, int, MPI.Datatype]:
            return buffer[lo * self._row_bytes : hi * self._row_bytes], hi - lo, row

        self._sources = [stretch for stretch in sources if self._has_bytes(stretch)]
        self._requests = [
            comm.Recv_init(part(receives, lo, hi), rank, _LINK_TAG)
            for rank, lo, hi in self._sources
        ]
        self._requests += [
            comm.Send_init(part(sends, lo, hi), rank, _LINK_TAG)
            for rank, lo, hi in targets
            if self._has_bytes((rank, lo, hi))
        ]
        self._statuses = [MPI.Status() for _ in self._requests]
        self._flight = _Flight([*self._requests, row])
        weakref.finalize(self, self._flight.free)

    def _has_bytes(self, stretch: Stretch) -> bool:
        """Tell whether a message is needed."""
        return self._row_bytes > 0 and stretch[2] > stretch[1]

    def start(self) -> None:
        """Send what the buffer holds now."""
        if self._flight.started:
            raise InputError("a link is started twice; finish it before it is started again")
        self._flight.started = True
        MPI.Prequest.Startall(self._requests)

    def finish(self) -> None:
        """Wait for all messages."""
        if not self._flight.started:
            raise InputError("a link is finished before it is started")
        try:
            MPI.Request.Waitall(self._requests, self._statuses)
            self._flight.started = False
        except MPI.Exception as error:
            raise RankError(f"an exchange with neighbours failed: {error}") from error
        for (rank, lo, hi), status in zip(self._sources, self._statuses, strict=False):
            came = status.Get_count(MPI.BYTE)
            if came != (hi - lo) * self._row_bytes:
                raise RankError(
                    f"{came} bytes from rank {rank}; wanted {hi - lo} rows of {self._row_bytes}"
                )


class _Flight:
    """MPI's side of a link: its handles, which hold on to the buffers, and whether it is used."""

    abandoned: ClassVar[list[list[Any]]] = []
    """Handles of links that were dropped before they finished: MPI may still write to buffers."""

    def __init__(self, handles: list[Any]) -> None:
        self.handles = handles
        self.started = False

    def free(self) -> None:
        """Free the handles, unless messages are on their way."""
        if self.started:
            self.abandoned.append(self.handles)
        elif not MPI.Is_finalized():
            for handle in self.handles:
                handle.Free()


def _committed_row(array: Array) -> MPI.Datatype:
    """Make the MPI datatype of one row of an array; it must be freed."""
    n_bytes = array.dtype.itemsize * int(np.prod(array.shape[1:], dtype=np.int64))
    return MPI.BYTE.Create_contiguous(n_bytes).Commit()


@contextmanager
def _row_type(array: Array) -> Iterator[MPI.Datatype]:
    """Make the MPI datatype of one row of an array."""
    row = _committed_row(array)
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
