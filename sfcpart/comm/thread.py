"""Ranks as threads of one process (`sfcpart.comm.room` is where they meet).

`run_ranks` makes property tests of distributed code fast and hang-free: a rank that fails, that
returns early or that calls another collective than the rest breaks the barrier, and every rank
gets an error instead of waiting for ever. Arrays are copied, as they would be between processes.
"""

from __future__ import annotations

import pickle
import threading
import time
from collections.abc import Callable, Sequence
from typing import Any, TypeVar

import numpy as np

from sfcpart.comm.base import Direction, Reduction, Stretch
from sfcpart.comm.gate import (
    check_root,
    movable,
    parcel,
    raise_parcel,
    reducible,
    relayed,
    rooted,
    row_form,
    same_rows,
    summable,
)
from sfcpart.comm.room import Call, Room, RoomBrokenError
from sfcpart.comm.staged import StagedLink
from sfcpart.dtypes import Array, Int64Array
from sfcpart.errors import InputError, RankError

__all__ = ["ThreadComm", "run_ranks"]

T = TypeVar("T")


class ThreadComm:
    """One rank of `run_ranks` (`sfcpart.comm.base.Comm` has the contract)."""

    def __init__(self, room: Room, rank: int) -> None:
        self._room = room
        self._rank = rank

    @property
    def rank(self) -> int:
        """Number of this rank."""
        return self._rank

    @property
    def size(self) -> int:
        """Number of ranks."""
        return self._room.size

    def _meet(
        self,
        name: str,
        agree: tuple[Any, ...],
        value: Any,
        take: Callable[[Any], T],
        once: Callable[[list[Any]], Any] = list,
    ) -> T:
        """Meet the other ranks in one collective."""
        return self._room.meet(self._rank, Call(name, agree, value), take, once)

    def barrier(self) -> None:
        """Return once every rank has arrived."""
        self._meet("barrier", (), None, lambda values: None)

    def allreduce(self, array: Array, op: Reduction = "sum") -> Array:
        """Combine equal-shaped arrays elementwise; every rank gets the result."""
        array = reducible(array, op)
        combine = {"sum": np.add, "min": np.minimum, "max": np.maximum}[op].reduce
        return self._meet(
            "allreduce",
            (op, array.dtype, array.shape),
            array,
            lambda whole: np.array(whole),
            once=lambda values: combine(np.stack(values), axis=0),
        )

    def exscan(self, array: Array) -> Array:
        """Return the elementwise sum over lower ranks (zeros on rank 0)."""
        array = summable(array)
        return self._meet(
            "exscan",
            (array.dtype, array.shape),
            array,
            lambda values: np.asarray(sum(values[: self._rank], np.zeros_like(array))),
        )

    def allgather(self, array: Array) -> list[Array]:
        """Return the arrays of all ranks in rank order."""
        array = movable(array)
        return self._meet(
            "allgather",
            (row_form(array),),
            array,
            lambda values: [value.copy() for value in values],
        )

    def bcast(self, array: Array | None, root: int = 0) -> Array:
        """Return the root's array on every rank."""
        check_root(root, self.size)
        sent = rooted(array, root=root, rank=self._rank)
        return self._meet("bcast", (root,), sent, lambda values: values[root].copy())

    def alltoall(self, arrays: Sequence[Array]) -> list[Array]:
        """Send `arrays[r]` to rank r; return what each rank sent here, in rank order."""
        rows = same_rows(arrays, self.size)
        return self._meet(
            "alltoall",
            (row_form(rows[0]),),
            rows,
            lambda values: [value[self._rank].copy() for value in values],
        )

    def link(
        self,
        sent: Array,
        received: Array,
        *,
        targets: Sequence[Stretch],
        sources: Sequence[Stretch],
    ) -> StagedLink:
        """Set up an exchange between two buffers."""
        return StagedLink(self, sent, received, targets=targets, sources=sources)

    def relay(
        self, array: Int64Array, step: Callable[[Int64Array], Int64Array], *, towards: Direction
    ) -> Int64Array:
        """Hand an array from rank to rank, each of which makes of it what the next one gets."""
        array = relayed(array)
        order = 1 if towards == "last" else -1
        steps = self._meet("relay", (towards,), step, lambda steps: steps[::order])
        made = array
        packed = None
        if self._rank == 0:  # one thread does it for all, who wait meanwhile
            for place, each in enumerate(steps):
                try:
                    made = relayed(each(made))
                except Exception as error:
                    failed = range(self.size)[::order][place]
                    packed = (parcel(error, failed), failed)
                    break
        first, packed = self._meet(
            "relay", (towards, "done"), (made, packed), lambda values: values[0]
        )
        if packed is not None:
            raise_parcel(packed[0], None, rank=packed[1])
        return np.array(first)

    def bcast_object(self, value: Any, root: int = 0) -> Any:
        """Return the root's small picklable value on every rank."""
        check_root(root, self.size)
        packed = pickle.dumps(value) if self._rank == root else b""
        return pickle.loads(
            self._meet("bcast_object", (root,), packed, lambda values: values[root])
        )

    def check(self, error: BaseException | None) -> None:
        """Turn an error of any rank into the same error on all."""
        packed = None if error is None else parcel(error, self._rank)
        values = self._meet("check", (), packed, list)
        failed = [rank for rank, value in enumerate(values) if value is not None]
        if failed:
            rank = -1 if len(failed) == self.size else failed[0]
            raise_parcel(values[failed[0]], error, rank=rank)


def run_ranks(size: int, function: Callable[[ThreadComm], T], *, timeout: float = 60.0) -> list[T]:
    """Call `function(comm)` on `size` ranks at once, each in a thread of its own.

    Parameters
    ----------
    size : int
        Number of ranks, at least 1.
    function : callable
        What every rank does; its argument is the rank's `ThreadComm`.
    timeout : float
        Seconds a rank waits for the others in a collective, and the whole for its ranks.

    Returns
    -------
    list
        What each rank returned, in rank order.

    Raises
    ------
    InputError
        If `size` is below 1.
    RankError
        If the ranks called different collectives, one returned while others still wait for it,
        or one did not end in time.
    Exception
        The error of the lowest rank that failed by itself.

    Examples
    --------
    >>> import numpy as np
    >>> run_ranks(3, lambda comm: int(comm.exscan(np.array([10]))[0]))
    [0, 10, 20]
    """
    if size < 1:
        raise InputError(f"{size} ranks; wanted at least 1")
    room = Room(size, timeout)
    ranks = [_Rank(room, rank, function) for rank in range(size)]
    for rank in ranks:
        rank.start()
    end = time.monotonic() + timeout
    for rank in ranks:
        rank.join(max(0.0, end - time.monotonic()))
    if any(rank.is_alive() for rank in ranks):
        room.barrier.abort()
    for rank in ranks:
        rank.join(1.0)  # those who only waited end now
    _raise_first(ranks, timeout)
    return [rank.result for rank in ranks]


class _Rank(threading.Thread):
    """The thread of one rank: its result or its error."""

    def __init__(self, room: Room, rank: int, function: Callable[[ThreadComm], Any]) -> None:
        super().__init__(name=f"rank {rank}", daemon=True)
        self.room = room
        self.comm = ThreadComm(room, rank)
        self.function = function
        self.result: Any = None
        self.error: BaseException | None = None

    def run(self) -> None:
        """Run the function; a failure, or a return the others do not share, breaks the barrier."""
        try:
            self.result = self.function(self.comm)
            self.comm._meet("return", (), None, lambda values: None)
        except BaseException as error:  # handed to the caller of run_ranks
            self.error = error
            self.room.barrier.abort()


def _raise_first(ranks: list[_Rank], timeout: float) -> None:
    """Raise the lowest rank's error that does not merely follow from another's failure."""
    errors = [rank.error for rank in ranks if rank.error is not None]
    own = [error for error in errors if not isinstance(error, RoomBrokenError)]
    if own:
        raise own[0]
    late = [rank.comm.rank for rank in ranks if rank.is_alive()]
    if late:
        raise RankError(f"rank {late[0]} did not end within {timeout:g} s")
    if errors:
        raise errors[0]
