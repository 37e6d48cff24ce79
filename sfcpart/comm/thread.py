"""Ranks as threads of one process: a barrier and a slot for each rank.

`run_ranks` makes property tests of distributed code fast and hang-free: a rank that fails, that
returns early or that calls another collective than the rest breaks the barrier, and every rank
gets an error instead of waiting for ever. Each collective costs two barriers; arrays are copied,
as they would be between processes.
"""

from __future__ import annotations

import pickle
import threading
import time
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, TypeVar

import numpy as np

from sfcpart.comm.base import Reduction, Stretch
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
from sfcpart.comm.staged import StagedLink
from sfcpart.dtypes import Array
from sfcpart.errors import InputError, RankError

__all__ = ["ThreadComm", "run_ranks"]

T = TypeVar("T")


class _RoomBrokenError(RankError):
    """Follows from the failure of another rank."""


@dataclass
class _Call:
    """What one rank asked for: the collective with what must agree, and the value it brought."""

    name: str
    agree: tuple[Any, ...]
    value: Any

    def __str__(self) -> str:
        return f"{self.name}({', '.join(map(str, self.agree))})"


class _Barrier:
    """A barrier that lets through all who met, even if it is broken before they have left.

    (`threading.Barrier` fails those still leaving; which error a run ends with would then be
    left to chance.)
    """

    def __init__(self, size: int, timeout: float) -> None:
        self._size = size
        self._timeout = timeout
        self._changed = threading.Condition()
        self._waiting = 0
        self._round = 0
        self._broken = False

    def wait(self) -> bool:
        """Wait for all; tell whether they came, or the barrier is broken or ran out of time."""
        with self._changed:
            if self._broken:
                return False
            mine = self._round
            self._waiting += 1
            if self._waiting == self._size:
                self._waiting = 0
                self._round += 1
                self._changed.notify_all()
            self._changed.wait_for(lambda: self._round != mine or self._broken, self._timeout)
            if self._round == mine:
                self.abort()
            return self._round != mine

    def abort(self) -> None:
        """Break the barrier: whoever waits, or will wait, is told."""
        with self._changed:  # a condition's lock is re-entrant
            self._broken = True
            self._changed.notify_all()


class _Room:
    """Where the ranks meet: one barrier, one slot a rank."""

    def __init__(self, size: int, timeout: float) -> None:
        self.size = size
        self.timeout = timeout
        self.barrier = _Barrier(size, timeout)
        self.slots: list[_Call] = [_Call("", (), None)] * size

    def wait(self, rank: int) -> None:
        """Wait for all ranks; an error if one of them will not come."""
        if not self.barrier.wait():
            raise _RoomBrokenError(
                f"rank {rank} waited for the others in vain: "
                f"a rank failed, or took more than {self.timeout:g} s"
            )

    def meet(self, rank: int, call: _Call, take: Callable[[list[Any]], T]) -> T:
        """Put a call into this rank's slot; when all are there, `take` from the values."""
        self.slots[rank] = call
        self.wait(rank)
        try:
            self._agree(rank)
            return take([other.value for other in self.slots])
        finally:
            self.wait(rank)  # nobody changes an array or a slot before all have read

    def _agree(self, rank: int) -> None:
        """Raise on all ranks if they did not all call the same collective alike."""
        first = self.slots[0]
        for other, call in enumerate(self.slots):
            if (call.name, call.agree) != (first.name, first.agree):
                raise RankError(
                    f"collectives do not match: rank 0 called {first}, rank {other} {call}; "
                    "every rank must call the same ones in the same order"
                )


class ThreadComm:
    """One rank of `run_ranks` (`sfcpart.comm.base.Comm` has the contract)."""

    def __init__(self, room: _Room, rank: int) -> None:
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
        self, name: str, agree: tuple[Any, ...], value: Any, take: Callable[[list[Any]], T]
    ) -> T:
        """Meet the other ranks in one collective."""
        return self._room.meet(self._rank, _Call(name, agree, value), take)

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
            lambda values: np.asarray(combine(np.stack(values), axis=0)),
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
        first = self._meet(
            "check", (), packed, lambda values: next((v for v in values if v is not None), None)
        )
        if first is not None:
            raise_parcel(first, error)


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
    room = _Room(size, timeout)
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

    def __init__(self, room: _Room, rank: int, function: Callable[[ThreadComm], Any]) -> None:
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
    own = [error for error in errors if not isinstance(error, _RoomBrokenError)]
    if own:
        raise own[0]
    late = [rank.comm.rank for rank in ranks if rank.is_alive()]
    if late:
        raise RankError(f"rank {late[0]} did not end within {timeout:g} s")
    if errors:
        raise errors[0]
