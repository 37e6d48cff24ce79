"""Where the cuts of a least-moving contiguous split can lie (`sfcpart.resplit.shift`).

First in whole blocks of the line, rounded outwards; then place by place among those blocks.
"""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.kernels.curve.least_moves import reach_down, reach_up
from sfcpart.resplit.home_line import HomeLine

__all__ = ["Bounds", "Windows", "find_windows"]

_NONE = np.empty(0, np.int64)


@dataclass(frozen=True, eq=False)
class Bounds:
    """What the chunks of a line may hold.

    Attributes
    ----------
    speed : (n_parts,) float64
    most : (n_parts,) int64
        The most each chunk may weigh.
    limit : (n_parts,) int64
        The most limited weight of each chunk; empty if there is none.
    """

    speed: FloatArray
    most: Int64Array
    limit: Int64Array = field(default_factory=lambda: _NONE)

    def loosened(self, most: Int64Array) -> Bounds:
        """Allow at least so much weight."""
        return replace(self, most=np.maximum(self.most, most))


@dataclass(frozen=True, eq=False)
class Windows:
    """The positions that cuts may take.

    Attributes
    ----------
    position, sums, limits : (n,) int64
        Ascending positions, weight and limited weight before them.
    low, high : (n_parts + 1,) int64
        First and last row of each cut.
    """

    position: Int64Array
    sums: Int64Array
    limits: Int64Array
    low: Int64Array
    high: Int64Array


@dataclass(frozen=True, eq=False)
class _Marks:
    """Positions that passes over the cuts stop at.

    Attributes
    ----------
    lowest, highest : (n_parts + 1,) int64
        What one item a chunk leaves.
    aim_up, aim_down : (n_parts + 1,) int64, or empty
        From below (above) a cut has no reason to stop before these but a full chunk.
    """

    lowest: Int64Array
    highest: Int64Array
    aim_up: Int64Array
    aim_down: Int64Array

    @classmethod
    def of(cls, line: HomeLine, home: Int64Array, bounds: Bounds) -> _Marks:
        """Place the marks; there are no aims where two items may be too much for a chunk."""
        room = np.arange(len(home) + 1)
        lowest, highest = room, line.n_items - room[::-1]
        heaviest, most_limited = line.heaviest.tolist()
        too_much = len(bounds.limit) and 2 * most_limited > int(bounds.limit.min())
        if too_much or 2 * heaviest > int(bounds.most.min()):
            return cls(lowest, highest, _NONE, _NONE)
        # away from the middle between the stretches of both chunks nothing more is ever kept;
        # a cut also stops where all chunks up to an aim have one item each
        between = (home[:-1, 1] + home[1:, 0]) // 2
        spare = np.concatenate(([0], between, [line.n_items])) - room
        aim_up = np.maximum(np.minimum.accumulate(spare[::-1])[::-1] + room, lowest)
        aim_down = np.minimum(np.maximum.accumulate(spare) + room, highest)
        return cls(lowest, highest, aim_up, aim_down)


def find_windows(line: HomeLine, home: Int64Array, bounds: Bounds) -> Windows | None:
    """Return windows that hold a best split if there is any; None if there is none.

    Parameters
    ----------
    line : HomeLine
    home : (n_parts, 2) int64
        First position of the stretch of each chunk, and that after its last.
    bounds : Bounds
    """
    marks = _Marks.of(line, home, bounds)
    blocks = _block_windows(line, marks, bounds)
    if blocks is None:
        return None
    position, sums, limits = line.between(*blocks)
    ends = [np.minimum(block << line.bits, line.n_items) for block in blocks]
    windows = _exact(_Rows(position, sums, limits, bounds), marks)
    if windows is None:
        return None
    low = np.maximum(windows[0], np.searchsorted(position, ends[0]))
    high = np.minimum(windows[1], np.searchsorted(position, ends[1]))
    if np.any(low > high):
        return None
    return Windows(position, sums, limits, low, high)


def _block_windows(
    line: HomeLine, marks: _Marks, bounds: Bounds
) -> tuple[Int64Array, Int64Array] | None:
    """Return the windows in blocks, as the positions that these begin at, rounded outwards."""
    n_blocks, bits = len(line.block_sums) - 1, line.bits
    rows = _Rows(_NONE, line.block_sums, line.block_limits, bounds)
    up_to = (1 << bits) - 1
    high = rows.up(np.minimum((marks.highest + up_to) >> bits, n_blocks), beyond=1)
    low = rows.down(marks.lowest >> bits, beyond=1)
    if high[-1] < n_blocks or low[0] > 0:
        return None
    if len(marks.aim_up):
        low = np.maximum(low, rows.up(_ended(marks.aim_up >> bits, n_blocks)))
        high = np.minimum(high, rows.down((marks.aim_down + up_to) >> bits))
    low[-1], high[0] = n_blocks, 0
    return None if np.any(low > high) else (low, high)


def _ended(aim: Int64Array, last: int) -> Int64Array:
    """Let the last cut aim at the end."""
    aim[-1] = last
    return aim


def _exact(rows: _Rows, marks: _Marks) -> tuple[Int64Array, Int64Array] | None:
    """Return the windows among the positions at hand, as rows."""
    position, last = rows.position, len(rows.position) - 1
    high = rows.up(np.searchsorted(position, marks.highest, side="right") - 1)
    low = rows.down(np.searchsorted(position, marks.lowest))
    if high[-1] < last or low[0] > 0:
        return None
    if len(marks.aim_up):
        low = np.maximum(low, rows.up(np.minimum(np.searchsorted(position, marks.aim_up), last)))
        down = np.searchsorted(position, marks.aim_down, side="right") - 1
        high = np.minimum(high, rows.down(down))
    low[-1], high[0] = last, 0
    return low, high


@dataclass(frozen=True, eq=False)
class _Rows:
    """Positions with the sums before them, and what chunks between them may hold."""

    position: Int64Array
    sums: Int64Array
    limits: Int64Array
    bounds: Bounds

    def up(self, aim: Int64Array, *, beyond: int = 0) -> Int64Array:
        """Place cuts from the first on, each at its aim or as far as the chunk before reaches."""
        cut = np.zeros(len(aim), np.int64)
        reach_up(aim.astype(np.int64), *self._given(), beyond, cut)
        return cut

    def down(self, aim: Int64Array, *, beyond: int = 0) -> Int64Array:
        """Place cuts from the last down, each at its aim or as low as the chunk after reaches."""
        cut = np.full(len(aim), len(self.sums) - 1, np.int64)
        reach_down(aim.astype(np.int64), *self._given(), beyond, cut)
        return cut

    def _given(self) -> tuple[Int64Array, Int64Array, Int64Array, Int64Array]:
        """Return what both passes look at."""
        return self.sums, self.limits, self.bounds.most, self.bounds.limit
