"""Shift the cuts along the unchanged curve order: the least moved weight of all contiguous splits.

Old parts are stretches of the line; new parts are stretches in the same order that keep their
names and weigh no more than the tolerance allows. Moved is what leaves its stretch, a sum over the
cuts (`sfcpart.kernels.curve.least_moves`): exact by dynamic programming over *windows* of
positions, found beforehand:

- A cut below its old place moves nothing more by going up, unless the chunk before it is full. So
  some best split has every cut at or above `min(old place, as far as the chunk before it reaches)`,
  and likewise from the other side: what one pass in each direction finds.
- The chunks before a cut cannot hold more than they may, nor those after it.

Windows are as wide as the excess that has to pass; only they are looked at, and gathered from the
ranks. With another number of parts than before, or parts that lost all cells, the line is first
cut as for a new split; chunks take the names of the old parts they share most with, and the cuts
are then shifted likewise, exact for these names.

If no contiguous split keeps the tolerance, that of the least heaviest part is the bound instead.

Cost: O(n) to add up weights along the curve, O(P log n) for windows, and the positions in them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import PART, Int32Array, Int64Array
from sfcpart.errors import InsufficientMemoryError, PartitionError
from sfcpart.kernels.curve.chunks import caps
from sfcpart.kernels.curve.least_moves import least_moves
from sfcpart.methods.curve.along_curve import unfit
from sfcpart.methods.curve.chunks import cut_line
from sfcpart.methods.curve.line import Line
from sfcpart.rebalance.home_line import HomeLine
from sfcpart.rebalance.overlap import Overlap
from sfcpart.rebalance.relabel import best_labels
from sfcpart.rebalance.task import Task
from sfcpart.rebalance.windows import Bounds, find_windows

__all__ = ["least_moving_cuts", "shift"]

_MOST_POSITIONS = 1 << 29


def shift(task: Task) -> Int32Array:
    """Return the new part of each local cell, (n_local,) int32.

    Parameters
    ----------
    task : Task

    Raises
    ------
    PartitionError
        If the old parts are no stretches of the curve, or limits cannot be kept.
    InputError
        As the curve methods.
    """
    problem = task.problem
    problem.comm.check(unfit(problem))
    homes = HomeLine.of(task)
    line = homes.line
    if line.n_items < problem.n_parts:
        raise PartitionError(
            f"groups leave {line.n_items} items for {problem.n_parts} parts; "
            "ask for fewer parts or smaller groups"
        )
    wish = _Wish.kept(homes) if _keeps_names(homes, task) else _Wish.matched(homes, task)
    cut = least_moving_cuts(line, wish.home, task_bounds(task, line, wish.label))
    mine = np.clip(cut, line.first, line.last)
    return homes.scatter(np.repeat(wish.label.astype(PART), np.diff(mine)))


@dataclass(frozen=True, eq=False)
class _Wish:
    """Names of the chunks along the line, and the stretch that each would like to keep."""

    label: Int64Array
    home: Int64Array

    @classmethod
    def kept(cls, homes: HomeLine) -> _Wish:
        """Keep the names and their order."""
        return cls(homes.label, np.column_stack([homes.start[:-1], homes.start[1:]]))

    @classmethod
    def matched(cls, homes: HomeLine, task: Task) -> _Wish:
        """Cut the line anew and take the names that keep the most."""
        problem, line = task.problem, homes.line
        cut = _balanced_cuts(task, line)
        shared = _shared_weight(homes, cut, task.n_old_parts)
        label = best_labels(
            shared, keep=task.keep, level_sizes=problem.level_sizes, kind=task.kind
        ).astype(np.int64)
        chunk = np.sort(shared.new[(label[shared.new] == shared.old) & (shared.weight > 0)])
        run_of = np.full(max(task.n_old_parts, problem.n_parts), -1, np.int64)
        run_of[homes.label] = np.arange(len(homes.label))
        run = run_of[label[chunk]]
        home = np.repeat(cut[:-1, None], 2, axis=1)  # nothing at home
        home[chunk] = np.column_stack([homes.start[run], homes.start[run + 1]])
        return cls(label, _ascending(home, chunk))


def _keeps_names(homes: HomeLine, task: Task) -> bool:
    """Tell whether every part has a stretch already."""
    n_parts = task.problem.n_parts
    return len(homes.label) == n_parts and bool(homes.label.max(initial=0) < n_parts)


def _ascending(home: Int64Array, chunk: Int64Array) -> Int64Array:
    """Put the empty stretches of chunks without a home between those of their neighbours."""
    lost = np.ones(len(home), np.bool_)
    lost[chunk] = False
    before = np.maximum.accumulate(np.where(lost, 0, home[:, 1]))
    end = home.max(initial=0)
    after = np.minimum.accumulate(np.where(lost, end, home[:, 0])[::-1])[::-1]
    out = home.copy()
    out[lost] = np.clip(home[lost], before[lost, None], np.maximum(before, after)[lost, None])
    return out


def task_bounds(task: Task, line: Line, label: Int64Array) -> Bounds:
    """Return what each chunk may hold, by the name it has."""
    limit = task.problem.part_limit
    return Bounds(
        speed=task.problem.part_speed[label].astype(np.float64),
        most=task.most[label],
        limit=None if limit is None or not len(line.limit) else limit[label],
    )


def _balanced_cuts(task: Task, line: Line) -> Int64Array:
    """Return the cuts with the least heaviest chunk, names in order."""
    problem = task.problem
    limit = None if not len(line.limit) else problem.part_limit
    return cut_line(
        line, begin=0, end=line.n_items, speed=problem.part_speed.astype(np.float64), limit=limit
    )


def _shared_weight(homes: HomeLine, cut: Int64Array, n_old_parts: int) -> Overlap:
    """Return the weight that stretches and chunks share."""
    edge = np.union1d(homes.start, cut)
    weight = np.diff(homes.line.sums_at(edge)[:, 0])
    run = np.searchsorted(homes.start, edge[:-1], side="right") - 1
    new = np.searchsorted(cut, edge[:-1], side="right") - 1
    old = homes.label[run]
    order = np.lexsort((new, old))
    columns = old[order].astype(PART), new[order].astype(PART), np.diff(edge)[order], weight[order]
    return Overlap(n_old_parts, len(cut) - 1, *columns)


def least_moving_cuts(line: Line, home: Int64Array, bounds: Bounds) -> Int64Array:
    """Return cuts for which the chunks keep the most of their home stretches, (n_parts + 1,).

    Parameters
    ----------
    line : Line
    home : (n_parts, 2) int64
        First position of the stretch that each chunk would like to keep, and that after its last;
        ascending and disjoint, empty ones between their neighbours.
    bounds : Bounds
        What the chunks may hold; loosened to the least heaviest chunk if it cannot be kept.

    Raises
    ------
    PartitionError
        If limits cannot be kept.
    InsufficientMemoryError
        If the windows are too wide together.
    """
    cut = _programme(line, home, bounds)
    if cut is not None:
        return cut
    plain = cut_line(line, begin=0, end=line.n_items, speed=bounds.speed, limit=bounds.limit)
    weight = np.diff(line.sums_at(plain)[:, 0])
    bottleneck = float((weight / bounds.speed).max())
    cut = _programme(line, home, bounds.loosened(caps(bottleneck, bounds.speed, int(weight.sum()))))
    assert cut is not None  # the plain cuts keep it
    return cut


def _programme(line: Line, home: Int64Array, bounds: Bounds) -> Int64Array | None:
    """Run the dynamic programme over the windows; None if no split keeps the bounds."""
    windows = find_windows(line, home, bounds)
    if windows is None:
        return None
    low, high = windows
    width = high - low + 1
    if int(width.sum()) > _MOST_POSITIONS:
        raise InsufficientMemoryError(
            f"the cuts may lie at {int(width.sum())} places together; with so much to move, "
            "split from scratch and relabel"
        )
    position, sums, limits = _gathered(line, low, high)
    at = np.searchsorted(position, low)
    widest = int(width.max())
    chosen = np.empty(len(low), np.int64)
    home_sums = line.sums_at(home.reshape(-1))[:, 0].reshape(-1, 2)
    kept = least_moves(
        at, at + width - 1, sums, limits, bounds.most,
        np.empty(0, np.int64) if bounds.limit is None else bounds.limit.astype(np.int64),
        np.ascontiguousarray(home_sums), np.empty((2, widest), np.int64),
        np.empty(widest, np.int64), np.concatenate(([0], np.cumsum(width)[:-1])),
        np.empty(int(width.sum()), np.int32), chosen,
    )  # fmt: skip
    return None if kept < 0 else position[chosen]


def _gathered(
    line: Line, low: Int64Array, high: Int64Array
) -> tuple[Int64Array, Int64Array, Int64Array]:
    """Return all positions in some window and the sums before them, on every rank."""
    apart = np.append(True, low[1:] > np.maximum.accumulate(high)[:-1] + 1)
    begin = low[apart]
    end = np.maximum.reduceat(high, np.flatnonzero(apart)) + 1
    position = np.concatenate([np.arange(a, b) for a, b in zip(begin, end, strict=True)])
    total, limit = (_sums_between(line, sums, begin, end) for sums in (line.total, line.limit))
    return position, total if len(total) else position, limit


def _sums_between(line: Line, sums: Int64Array, begin: Int64Array, end: Int64Array) -> Int64Array:
    """Return the sums before the positions of some ranges, from the ranks that hold them."""
    own = np.empty(0, np.int64)
    if len(sums):
        first = line.first + (line.comm.rank > 0)  # what parts two stretches is the lower one's
        low, high = np.clip(begin, first, line.last + 1), np.clip(end, first, line.last + 1)
        pieces = [sums[a - line.first : b - line.first] for a, b in zip(low, high, strict=True)]
        own = np.concatenate(pieces)
    return np.concatenate(line.comm.allgather(own))
