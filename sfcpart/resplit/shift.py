"""Shift the cuts along the unchanged curve order: the least moved weight of all contiguous splits.

Old parts are stretches of the line; new parts are stretches in the same order that keep their
names and weigh no more than the tolerance allows. Moved is what leaves its stretch, a sum over the
cuts (`sfcpart.kernels.curve.least_moves`): exact by dynamic programming over *windows* of
positions, found beforehand:

- A cut below its old place moves nothing more by going up, unless the chunk before it is full. So
  some best split has every cut at or above `min(old place, as far as the chunk before it reaches)`,
  and likewise from the other side: what one pass in each direction finds.
- The chunks before a cut cannot hold more than they may, nor those after it.

Windows are as wide as the excess that has to pass; only they are looked at place by place. With
another number of parts than before, or parts that lost all cells, the line is first cut as for a
new split; chunks take the names of the old parts they share most with, and the cuts are then
shifted likewise, exact for these names.

If no contiguous split keeps the tolerance, that of the least heaviest part is the bound instead.

Cost: three passes over the cells in file order, and the places in the windows. Every rank holds
the windows and a table of blocks; no rank more than that beyond its cells.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from sfcpart.dtypes import PART, Int32Array, Int64Array
from sfcpart.errors import InsufficientMemoryError, PartitionError
from sfcpart.kernels.curve.chunks import caps
from sfcpart.kernels.curve.least_moves import least_moves
from sfcpart.methods.curve.along_curve import unfit
from sfcpart.methods.curve.chunks import cut_line
from sfcpart.methods.curve.line import Line
from sfcpart.resplit.home_line import HomeLine
from sfcpart.resplit.overlap import Overlap
from sfcpart.resplit.relabel import best_labels
from sfcpart.resplit.task import Task
from sfcpart.resplit.windows import Bounds, find_windows

__all__ = ["Wish", "least_moving_cuts", "shift"]

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
    line = HomeLine.of(task)
    if line.n_items < problem.n_parts:
        raise PartitionError(
            f"groups leave {line.n_items} items for {problem.n_parts} parts; "
            "ask for fewer parts or smaller groups"
        )
    wish = Wish.kept(line) if _keeps_names(line) else Wish.matched(line)
    return line.names(least_moving_cuts(line, wish), wish.label)


@dataclass(frozen=True, eq=False)
class Wish:
    """Names of the chunks along the line, and the stretch that each would like to keep.

    Attributes
    ----------
    label : (n_parts,) int64
    home : (n_parts, 2) int64
        First position of the stretch and that after its last; ascending and disjoint, empty ones
        between their neighbours.
    home_sums : (n_parts, 2) int64
        Weight before these; alike for empty stretches.
    """

    label: Int64Array
    home: Int64Array
    home_sums: Int64Array

    @classmethod
    def kept(cls, line: HomeLine) -> Wish:
        """Keep the names and their order."""
        return cls(line.label, _pairs(line.start), _pairs(line.start_sums))

    @classmethod
    def matched(cls, line: HomeLine) -> Wish:
        """Cut the line anew and take the names that keep the most."""
        task, plain = line.task, line.as_line()
        n_parts = task.problem.n_parts
        speed = task.problem.part_speed.astype(np.float64)
        limit = task.problem.part_limit if task.is_limited else None
        cut = cut_line(plain, begin=0, end=plain.n_items, speed=speed, limit=limit)
        shared = _shared_weight(line, plain, cut)
        sizes = task.problem.level_sizes
        label = best_labels(shared, keep=task.keep, level_sizes=sizes, kind=task.kind)
        chunk = np.sort(shared.new[(label[shared.new] == shared.old) & (shared.weight > 0)])
        run_of = np.full(max(task.n_old_parts, n_parts), -1, np.int64)
        run_of[line.label] = np.arange(len(line.label))
        run = run_of[label[chunk]]
        home, sums = np.repeat(cut[:-1, None], 2, axis=1), np.zeros((n_parts, 2), np.int64)
        home[chunk], sums[chunk] = _pairs(line.start)[run], _pairs(line.start_sums)[run]
        return cls(label.astype(np.int64), _ascending(home, chunk), sums)


def _keeps_names(line: HomeLine) -> bool:
    """Tell whether every part has a stretch already."""
    n_parts = line.task.problem.n_parts
    return len(line.label) == n_parts and bool(line.label.max(initial=0) < n_parts)


def _pairs(edges: Int64Array) -> Int64Array:
    """Return beginning and end of each stretch."""
    return np.column_stack([edges[:-1], edges[1:]])


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


def _shared_weight(line: HomeLine, plain: Line, cut: Int64Array) -> Overlap:
    """Return the weight that stretches and chunks share."""
    edge = np.union1d(line.start, cut)
    weight = np.diff(plain.sums_at(edge)[:, 0])
    run = np.searchsorted(line.start, edge[:-1], side="right") - 1
    new = np.searchsorted(cut, edge[:-1], side="right") - 1
    old = line.label[run]
    order = np.lexsort((new, old))
    columns = old[order].astype(PART), new[order].astype(PART), np.diff(edge)[order], weight[order]
    return Overlap(line.task.n_old_parts, len(cut) - 1, *columns)


def least_moving_cuts(line: HomeLine, wish: Wish) -> Int64Array:
    """Return cuts for which the chunks keep the most of their home stretches, (n_parts + 1,).

    If no split keeps the tolerance, the least heaviest chunk there is bounds the others.

    Raises
    ------
    PartitionError
        If limits cannot be kept.
    InsufficientMemoryError
        If the windows are too wide together.
    """
    task = line.task
    bounds = Bounds(
        speed=task.problem.part_speed[wish.label].astype(np.float64), most=task.most[wish.label]
    )
    limit = None
    if task.is_limited and task.problem.part_limit is not None:
        limit = task.problem.part_limit[wish.label].astype(np.int64)
        bounds = replace(bounds, limit=limit)
    cut = _programme(line, wish, bounds)
    if cut is not None:
        return cut
    plain = line.as_line()
    cut = cut_line(plain, begin=0, end=plain.n_items, speed=bounds.speed, limit=limit)
    weight = np.diff(plain.sums_at(cut)[:, 0])
    bottleneck = float((weight / bounds.speed).max())
    bounds = bounds.loosened(caps(bottleneck, bounds.speed, int(weight.sum())))
    best = _programme(line, wish, bounds)
    assert best is not None  # these cuts keep it
    return best


def _programme(line: HomeLine, wish: Wish, bounds: Bounds) -> Int64Array | None:
    """Run the dynamic programme over the windows; None if no split keeps the bounds."""
    windows = find_windows(line, wish.home, bounds)
    if windows is None:
        return None
    width = windows.high - windows.low + 1
    if int(width.sum()) > _MOST_POSITIONS:
        raise InsufficientMemoryError(
            f"the cuts may lie at {int(width.sum())} places together; with so much to move, "
            "split from scratch and relabel"
        )
    widest = int(width.max())
    chosen = np.empty(len(width), np.int64)
    kept = least_moves(
        windows.low, windows.high, windows.sums, windows.limits, bounds.most, bounds.limit,
        wish.home_sums, np.empty((2, widest), np.int64), np.empty(widest, np.int64),
        np.concatenate(([0], np.cumsum(width)[:-1])), np.empty(int(width.sum()), np.int32), chosen,
    )  # fmt: skip
    return None if kept < 0 else windows.position[chosen]
