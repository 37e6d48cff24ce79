"""Where the cuts of a least-moving contiguous split can lie (`sfcpart.rebalance.shift`).

Each pass goes once along the line, from rank to rank; only the state of the pass travels.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.kernels.curve.least_moves import reach_down, reach_up
from sfcpart.methods.curve.line import Line

__all__ = ["Bounds", "find_windows"]


@dataclass(frozen=True, eq=False)
class Bounds:
    """What the chunks of a line may hold.

    Attributes
    ----------
    speed : (n_parts,) float64
    most : (n_parts,) int64
        The most each chunk may weigh.
    limit : (n_parts,) int64 or None
        The most limited weight of each chunk.
    """

    speed: FloatArray
    most: Int64Array
    limit: Int64Array | None

    def loosened(self, most: Int64Array) -> Bounds:
        """Allow at least so much weight."""
        return replace(self, most=np.maximum(self.most, most))


def find_windows(
    line: Line, home: Int64Array, bounds: Bounds
) -> tuple[Int64Array, Int64Array] | None:
    """Return the lowest and the highest position of each cut, (n_parts + 1,) each.

    They hold a best split if there is any; None if there is none.
    """
    n_parts, n_items = len(home), line.n_items
    room = np.arange(n_parts + 1)
    lowest, highest = room, n_items - room[::-1]  # one item a chunk
    limit = np.empty(0, np.int64) if bounds.limit is None else bounds.limit.astype(np.int64)
    passes = _Passes(line, bounds.most, limit)
    high = passes.up(highest)
    low = passes.down(lowest)
    if high[-1] < n_items or low[0] > 0:
        return None
    if not _is_heavy(line, bounds):
        aim = _aims(home, n_items)
        # a cut stops below (above) its aim also where all chunks up to there have one item each
        low = np.maximum(low, passes.up(np.minimum.accumulate((aim - room)[::-1])[::-1] + room))
        high = np.minimum(high, passes.down(np.maximum.accumulate(aim - room) + room))
    low[-1], high[0] = n_items, 0
    return None if np.any(low > high) else (low, high)


def _aims(home: Int64Array, n_items: int) -> Int64Array:
    """Return for each cut a place from which moving away never keeps more."""
    between = (home[:-1, 1] + home[1:, 0]) // 2
    return np.concatenate(([0], between, [n_items])).astype(np.int64)


def _is_heavy(line: Line, bounds: Bounds) -> bool:
    """Tell whether two items side by side may be too much for a chunk."""
    found = np.zeros(2, np.int64)
    for _, weight, limited in line.windows(0, line.n_items, 1):
        found = np.maximum(found, [weight.max(initial=0), limited.max(initial=0)])
    heaviest, most = (int(x) for x in line.comm.allreduce(found, "max"))
    heaviest = heaviest if len(line.total) else 1
    too_much = bounds.limit is not None and 2 * most > int(bounds.limit.min())
    return too_much or 2 * heaviest > int(bounds.most.min())


@dataclass(frozen=True, eq=False)
class _Passes:
    """Passes along a line whose chunks may hold so much."""

    line: Line
    most: Int64Array
    limit: Int64Array

    def up(self, aim: Int64Array) -> Int64Array:
        """Place cuts from the first on, each at its aim or as far as the chunk before reaches."""
        line, n_parts = self.line, len(self.most)
        cut = np.zeros(n_parts + 1, np.int64)
        part, origin = 0, np.zeros(2, np.int64)
        for rank in range(line.comm.size):
            state = None
            if rank == line.comm.rank:
                given = (
                    self._span(line.comm.size - 1),
                    line.total,
                    line.limit,
                    self.most,
                    self.limit,
                )
                part = reach_up(part, origin, aim, *given, cut)
                state = np.concatenate(([part], origin, cut))
            part, origin, cut = _parted(line.comm.bcast(state, root=rank))
        return cut

    def down(self, aim: Int64Array) -> Int64Array:
        """Place cuts from the last down, each at its aim or as low as the chunk after reaches."""
        line, n_parts = self.line, len(self.most)
        cut = np.full(n_parts + 1, line.n_items, np.int64)
        part, origin = n_parts, line.sums_at(np.array([line.n_items]))[0]
        for rank in reversed(range(line.comm.size)):
            state = None
            if rank == line.comm.rank:
                given = self._span(0), line.total, line.limit, self.most, self.limit
                part = reach_down(part, origin, aim, *given, cut)
                state = np.concatenate(([part], origin, cut))
            part, origin, cut = _parted(line.comm.bcast(state, root=rank))
        return cut

    def _span(self, end: int) -> Int64Array:
        """Return this rank's first and last position, and whether the pass ends on it."""
        line = self.line
        return np.array([line.first, line.last, line.comm.rank == end], np.int64)


def _parted(state: Int64Array) -> tuple[int, Int64Array, Int64Array]:
    """Take the state of a pass apart."""
    return int(state[0]), state[1:3].copy(), state[3:].copy()
