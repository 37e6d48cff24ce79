"""Where ranks that are threads meet: a barrier, and a slot for each rank.

Each meeting costs two barriers. A rank that fails breaks the barrier, and whoever waits there, or
comes later, gets an error instead of waiting for ever.
"""

from __future__ import annotations

import threading
from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, TypeVar

from sfcpart.errors import RankError

__all__ = ["Barrier", "Call", "Room", "RoomBrokenError"]

T = TypeVar("T")


class RoomBrokenError(RankError):
    """Follows from the failure of another rank."""


@dataclass
class Call:
    """What one rank asked for: the collective with what must agree, and the value it brought."""

    name: str
    agree: tuple[Any, ...]
    value: Any

    def __str__(self) -> str:
        return f"{self.name}({', '.join(map(str, self.agree))})"


class Barrier:
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

    def wait(self, before_all_go: Callable[[], None]) -> bool:
        """Wait for all; tell whether they came, or the barrier is broken or ran out of time.

        Whoever comes last calls `before_all_go`.
        """
        with self._changed:
            if self._broken:
                return False
            mine = self._round
            self._waiting += 1
            if self._waiting == self._size:
                before_all_go()
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


class Room:
    """Where the ranks meet: one barrier, one slot a rank."""

    def __init__(self, size: int, timeout: float) -> None:
        self.size = size
        self.timeout = timeout
        self.barrier = Barrier(size, timeout)
        self.slots: list[Call] = [Call("", (), None)] * size
        self.difference = ""
        self.found: Any = None

    def wait(self, rank: int, before_all_go: Callable[[], None] = lambda: None) -> None:
        """Wait for all ranks; an error if one of them will not come."""
        if not self.barrier.wait(before_all_go):
            raise RoomBrokenError(
                f"rank {rank} waited for the others in vain: "
                f"a rank failed, or took more than {self.timeout:g} s"
            )

    def meet(
        self,
        rank: int,
        call: Call,
        take: Callable[[Any], T],
        once: Callable[[list[Any]], Any] = lambda values: values,
    ) -> T:
        """Put a call into this rank's slot; when all are there, `take` from the values.

        What one rank can do for all, `once` makes of the values, and `take` is given that.
        """
        self.slots[rank] = call
        self.wait(rank, lambda: self._look(once))
        try:
            if self.difference:
                raise RankError(self.difference)
            return take(self.found)
        finally:
            self.wait(rank)  # nobody changes an array or a slot before all have read

    def _look(self, once: Callable[[list[Any]], Any]) -> None:
        """Do for all what has to be done once: compare the calls, and prepare what they take."""
        self.difference = self._difference()
        if not self.difference:
            self.found = once([call.value for call in self.slots])

    def _difference(self) -> str:
        """Tell whether the ranks did not all call the same collective alike."""
        first = self.slots[0]
        for other, call in enumerate(self.slots):
            if (call.name, call.agree) != (first.name, first.agree):
                return (
                    f"collectives do not match: rank 0 called {first}, rank {other} {call}; "
                    "every rank must call the same ones in the same order"
                )
        return ""
