"""Items in a line, spread over ranks, with the sums before every position.

Each rank holds one stretch of the line: `total[i]` is the weight of all items before position
`first + i`. The sums reach a few positions into the next stretches, so that small windows need no
messages. Items of weight 1 and a missing limit need no array at all.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import OFFSET, WEIGHT, Int64Array
from sfcpart.methods.curve.abreast import Ask, Asking, answered

__all__ = ["Line"]

_BLOCK = 1 << 15


@dataclass(frozen=True, eq=False)
class Line:
    """A rank's stretch of a line of weighted items.

    Attributes
    ----------
    comm : Comm
    offset : (size + 1,) int64
        Position of each rank's first item; the last entry is the number of items.
    total : (n_local + 1 + k,) int64, or empty
        Weight before position offset[rank] + i; empty if each item weighs 1.
    limit : (n_local + 1 + k,) int64, or empty
        The same for the limited weight; empty if there is none.
    limit_unit : float
        What 1 of the limited weight stands for, for messages.
    """

    comm: Comm
    offset: Int64Array
    total: Int64Array
    limit: Int64Array
    limit_unit: float = 1.0

    @classmethod
    def of(
        cls,
        n_items: int,
        *,
        weight: Int64Array | None,
        limit_weight: Int64Array | None,
        reach: int,
        comm: Comm,
        limit_unit: float = 1.0,
    ) -> Line:
        """Build the sums; `reach` is how many positions beyond the stretch they must cover."""
        lengths = np.concatenate(comm.allgather(np.array([n_items], OFFSET)))
        offset = np.concatenate(([0], np.cumsum(lengths))).astype(OFFSET)
        sums = [
            np.empty(0, WEIGHT) if given is None else _sums(given, offset, reach, comm)
            for given in (weight, limit_weight)
        ]
        return cls(comm, offset, sums[0], sums[1], limit_unit)

    @property
    def first(self) -> int:
        """Position of this rank's first item."""
        return int(self.offset[self.comm.rank])

    @property
    def last(self) -> int:
        """Position after this rank's last item."""
        return int(self.offset[self.comm.rank + 1])

    @property
    def n_items(self) -> int:
        """Items of all ranks."""
        return int(self.offset[-1])

    def own_part(self, begin: int, end: int) -> tuple[int, int]:
        """Return the positions of [begin, end) that are this rank's, perhaps none."""
        first = min(max(self.first, begin), end)
        return first, max(first, min(self.last, end))

    def sums_at(self, positions: Int64Array) -> Int64Array:
        """Return (weight, limited weight) before some positions, (n, 2), on every rank."""
        return answered(self.comm, [self.ask_sums(positions)])[0]

    def ask_sums(self, positions: Int64Array) -> Asking[Int64Array]:
        """Ask for (weight, limited weight) before some positions, (n, 2)."""
        here = (positions > self.first) & (positions <= self.last)
        found = np.zeros((len(positions), 2), WEIGHT)
        for column, sums in enumerate((self.total, self.limit)):
            if len(sums):
                found[here, column] = sums[positions[here] - self.first]
        before: Int64Array = yield Ask("sum", found)
        if not len(self.total):
            before[:, 0] = positions
        return before

    def windows(
        self, begin: int, end: int, width: int
    ) -> Iterator[tuple[int, Int64Array, Int64Array]]:
        """Yield position, weights and limited weights of every `width` items that start here.

        In blocks that fit the cache; the arrays are empty where the line has none.
        """
        first, last = self.own_part(begin, max(begin, end - width + 1))
        for start in range(first, last, _BLOCK):
            low, high = start - self.first, min(start + _BLOCK, last) - self.first
            pair = [
                sums[low + width : high + width] - sums[low:high] if len(sums) else sums
                for sums in (self.total, self.limit)
            ]
            yield start, pair[0], pair[1]


def _sums(values: Int64Array, offset: Int64Array, reach: int, comm: Comm) -> Int64Array:
    """Return the sums before each position of the stretch and `reach` positions more."""
    last, end = offset[comm.rank + 1], offset[-1]
    n = len(values)
    n_more = int(min(reach, end - last))
    sums = np.empty(n + 1 + n_more, WEIGHT)
    sums[0] = 0
    np.cumsum(values, out=sums[1 : n + 1])
    sums[: n + 1] += comm.exscan(sums[n : n + 1])[0]

    def step(came: Int64Array) -> Int64Array:
        sums[n + 1 :] = came[:n_more]  # the sums before the positions after this stretch
        return sums[1 : 1 + reach]

    comm.relay(np.empty(0, WEIGHT), step, towards="first")
    return sums
