"""Fair positions: where cuts would lie if items could be shared evenly.

With equal speeds the fair share leaves items aside that outweigh it alone, since their parts can
take nothing else: at the level L with sum min(w, L) = P L, cut j is fair where the sum of
min(w, L) before it is j L. So one heavy item does not leave the parts before it with loads that
differ. With unequal speeds the share of a part is its speed's share of the whole.

Cost: O(P log n); a pass over the items for each round of the level if one outweighs the share.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.methods.curve.abreast import Ask, Asking
from sfcpart.methods.curve.line import Line

__all__ = ["fair_positions"]

_ROUNDS = 8


def fair_positions(
    line: Line, *, begin: int, end: int, edge_sums: Int64Array, speed: FloatArray, least: int
) -> Asking[Int64Array]:
    """Ask for the position nearest to each part's fair share of [begin, end), (P + 1,) int64.

    Parameters
    ----------
    line : Line
    begin, end : int
    edge_sums : (2, 2) int64
        Weight and limited weight before `begin` and `end`.
    speed : (P,) float64
    least : int
        Items each part takes at least: positions leave room for them.
    """
    n_parts, n_items = len(speed), end - begin
    weight = int(edge_sums[1, 0] - edge_sums[0, 0])
    equal = bool(speed.min() == speed.max())
    share = np.concatenate(([0.0], np.cumsum(np.ones(n_parts) if equal else speed)))
    if not len(line.total) or weight == 0:
        found = begin + np.rint(n_items * share / share[-1]).astype(np.int64)
    else:
        aim = weight * share / share[-1]
        if equal:
            aim = yield from _around_heavy(line, begin, end, aim, int(edge_sums[0, 0]))
        found = yield from _nearest(line, begin, end, aim, int(edge_sums[0, 0]))
        found[aim >= weight] = end
    rest = least * np.arange(n_parts + 1)
    return np.asarray(np.clip(found, begin + rest, end - rest[::-1]), np.int64)


def _nearest(line: Line, begin: int, end: int, aim: FloatArray, base: int) -> Asking[Int64Array]:
    """Ask for the positions whose sums are nearest to some sums, on every rank."""
    first, last = line.own_part(begin, end)
    found = np.zeros(len(aim), np.int64)
    if last > first:
        sums = line.total[first - line.first : last - line.first + 1]
        at = np.searchsorted(sums, np.floor(aim).astype(np.int64) + base, side="right") - 1
        here = (at >= 0) & (at < last - first)
        at = np.where(here, at, 0)
        after = aim - (sums[at] - base) > (sums[at + 1] - base) - aim
        found = np.where(here, first + at + after, 0)
    nearest: Int64Array = yield Ask("sum", found)
    return nearest


def _around_heavy(
    line: Line, begin: int, end: int, aim: FloatArray, base: int
) -> Asking[FloatArray]:
    """Move the aims so that items heavier than the fair level count as one part each."""
    n_parts = len(aim) - 1
    level, n_heavy = aim[-1] / n_parts, 0
    rows = np.empty((0, 2), np.int64)
    for _ in range(_ROUNDS):
        above = _items_above(line, begin, end, level)
        mine = np.array([len(above), above[:, 1].sum()], np.int64)
        count, weight = map(int, (yield Ask("sum", mine)))
        if count == n_heavy or count >= n_parts:  # the latter if a level was rounded down
            break
        rows, n_heavy, level = above, count, (aim[-1] - weight) / (n_parts - count)
    if n_heavy == 0:
        return aim
    start, heavy = np.concatenate((yield Ask("gather", rows))).astype(np.float64).T
    start = start - base
    surplus = np.cumsum(heavy - level)
    begins = start - np.append(0.0, surplus[:-1])  # where heavy items begin, each counted as level
    fair = np.arange(n_parts + 1) * level
    k = np.searchsorted(begins, fair, side="left") - 1  # the last heavy item that begins before
    inside = (k >= 0) & (fair < begins[k] + level)
    beyond = fair + np.where(k >= 0, surplus[k], 0.0)
    nearer = np.where(fair - begins[k] < level / 2, start[k], start[k] + heavy[k])
    return np.asarray(np.minimum(np.where(inside, nearer, beyond), aim[-1]))


def _items_above(line: Line, begin: int, end: int, level: float) -> Int64Array:
    """Return (weight before, weight) of this rank's items heavier than a level."""
    found = [np.empty((0, 2), np.int64)]
    for first, weight, _ in line.windows(begin, end, 1):
        at = np.flatnonzero(weight > level)
        found.append(np.column_stack([line.total[first - line.first + at], weight[at]]))
    return np.concatenate(found)
