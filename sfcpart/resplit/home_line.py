"""The cells along the curve as the old split left them: one stretch of the line a part.

Every cell knows its place on the line (kept with the curve order), so that one pass over the cells
in file order tells what stretch each part has and what each block of the line weighs; only where
cuts may move is the line looked at place by place.

An old split by chunks of the same curve is one stretch a part. Where the mesh was refined since,
the box around the centres is another, and some cells near the cuts change sides; where few did,
the line is put in order by old part first and place on the curve second, so that every part is
one stretch again.

Cost: one pass over the cells, of memory in order; a sort if stretches were mended.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.curve import CURVES, CurveSlice, key_slice
from sfcpart.dtypes import PART, Array, Int32Array, Int64Array, IntArray, index_dtype
from sfcpart.errors import PartitionError
from sfcpart.kernels.curve.places import add_places, note_homes, take_names
from sfcpart.kernels.threads import run_ranges
from sfcpart.methods.curve.line import Line
from sfcpart.methods.together import Bundles
from sfcpart.resplit.task import Task

__all__ = ["HomeLine"]

_STRAY = 0.05
"""Share of the cells that may lie outside the stretch of their part and still be mended."""
_BLOCKS, _BLOCKS_A_PART = 1 << 15, 64
_NONE = np.empty(0, np.int64)


@dataclass(frozen=True, eq=False)
class HomeLine:
    """A line of items and the stretch of it that each old part holds.

    Attributes
    ----------
    task : Task
    curve : CurveSlice
    items : _Items
    bits : int
        Blocks of the line have 2**bits items.
    label : (n_runs,) int64
        Old parts in the order of their stretches.
    start : (n_runs + 1,) int64
        First item of each stretch; the number of items at the end.
    start_sums : (n_runs + 1,) int64
        Weight before these.
    block_sums, block_limits : (n_blocks + 1,) int64
        Weight before each block and of all; limited weight, empty if there is none.
    heaviest : (2,) int64
        The most that an item weighs, and has of limited weight.
    """

    task: Task
    curve: CurveSlice
    items: _Items
    bits: int
    label: Int64Array
    start: Int64Array
    start_sums: Int64Array
    block_sums: Int64Array
    block_limits: Int64Array
    heaviest: Int64Array

    @classmethod
    def of(cls, task: Task) -> HomeLine:
        """Lay the cells out along the curve.

        Raises
        ------
        PartitionError
            If the old parts are no stretches of the curve.
        """
        problem = task.problem
        name = next((name for name in CURVES if name == task.method), "hilbert")
        curve = problem.place(problem.centers, curve=name, comm=problem.comm)
        line = cls._laid(task, curve)
        if line is None:
            line = cls._laid(task, _in_order_of_parts(curve, task))
        assert line is not None
        return line

    @classmethod
    def _laid(cls, task: Task, curve: CurveSlice) -> HomeLine | None:
        """Note what each part and each block holds; None if parts are no stretches."""
        comm, items = task.problem.comm, _Items.of(task, curve)
        blocks = max(_BLOCKS, _BLOCKS_A_PART * task.problem.n_parts)
        bits = ((items.count - 1) // blocks).bit_length()
        n_blocks = ((items.count - 1) >> bits) + 1
        weight, limit = _or_none(task.problem.weight), _or_none(task.problem.limit_weight)
        found = run_ranges(
            note_homes, len(items.place), items.place, items.home, weight, limit, bits,
            task.n_old_parts, n_blocks, smallest=1 << 18,
        )  # fmt: skip
        lowest = comm.allreduce(np.minimum.reduce([ends[:, 0] for ends, _, _ in found]), "min")
        highest = comm.allreduce(np.maximum.reduce([ends[:, 1] for ends, _, _ in found]), "max")
        weigh = comm.allreduce(np.add.reduce([ends[:, 2] for ends, _, _ in found]))
        held = np.flatnonzero(highest >= 0)
        label = held[np.argsort(lowest[held], kind="stable")]
        if np.any(highest[label][:-1] >= lowest[label][1:]):
            return None
        sums = _before(comm.allreduce(np.add.reduce([sums for _, sums, _ in found])))
        most = comm.allreduce(np.maximum.reduce([most for _, _, most in found]), "max")
        return cls(
            task=task,
            curve=curve,
            items=items,
            bits=bits,
            label=label,
            start=np.append(lowest[label], items.count),
            start_sums=_before(weigh[label]),
            block_sums=np.ascontiguousarray(sums[:, 0]),
            block_limits=np.ascontiguousarray(sums[:, 1]) if task.is_limited else _NONE,
            heaviest=np.maximum(most, items.heaviest),
        )

    @property
    def n_items(self) -> int:
        """Number of items."""
        return self.items.count

    def as_line(self) -> Line:
        """Return the line as a new split sees it."""
        problem, curve = self.task.problem, self.curve
        weight = None if problem.weight is None else curve.gather(problem.weight)
        limited = None if problem.limit_weight is None else curve.gather(problem.limit_weight)
        n_items = len(curve)
        if problem.group is not None:
            bundles = Bundles.of(
                curve.gather(problem.group), weight=weight, limit_weight=limited, comm=curve.comm
            )
            n_items, weight, limited = len(bundles.name), bundles.weight, bundles.limit_weight
        return Line.of(
            n_items,
            weight=weight,
            limit_weight=limited if self.task.is_limited else None,
            reach=2,
            comm=curve.comm,
            limit_unit=problem.limit_unit,
        )

    def between(
        self, low: Int64Array, high: Int64Array
    ) -> tuple[Int64Array, Int64Array, Int64Array]:
        """Return all positions of some ranges and the sums before them, on every rank.

        Parameters
        ----------
        low, high : (k,) int64
            First and last position of each range, as numbers of blocks that begin there.

        Returns
        -------
        position, sums, limits : (n,) int64
            Ascending positions, weight and limited weight before each.
        """
        n_blocks = len(self.block_sums) - 1
        change = np.zeros(n_blocks + 1, np.int64)
        np.add.at(change, low, 1)
        np.subtract.at(change, high, 1)
        inside = np.cumsum(change) > 0
        blocks = np.flatnonzero(inside)
        position = ((blocks << self.bits)[:, None] + np.arange(1 << self.bits)).reshape(-1)
        position = position[: np.searchsorted(position, self.n_items)]
        edge = np.unique(np.concatenate([low, high]))
        edge = edge[~inside[edge]]  # where a range ends and no other goes on
        after = np.minimum(edge << self.bits, self.n_items)
        at = np.searchsorted(position, after)
        problem = self.task.problem
        sums = []
        for values, before in (
            (problem.weight, self.block_sums),
            (problem.limit_weight, self.block_limits),
        ):
            found = self._dense(_or_none(values), before, blocks)[: len(position)]
            sums.append(np.insert(found, at, before[edge]) if len(before) else before)
        return np.insert(position, at, after), sums[0], sums[1]

    def _dense(self, values: Int64Array, before: Int64Array, blocks: Int64Array) -> Int64Array:
        """Return the sum before every position of some blocks."""
        size = 1 << self.bits
        own = np.zeros(size * len(blocks) if len(before) else 0, np.int64)
        if not len(own):
            return own
        first = np.full(len(before) - 1, -1, np.int64)
        first[blocks] = size * np.arange(len(blocks))
        place = self.items.place
        grouped = self.task.problem.group is not None  # who share a place share a thread
        smallest = len(place) + 1 if grouped else 1 << 18
        run_ranges(add_places, len(place), place, values, self.bits, first, own, smallest=smallest)
        weight = self.task.problem.comm.allreduce(own).reshape(-1, size)
        sums = np.cumsum(weight, axis=1)
        sums += before[blocks, None] - weight
        return np.asarray(sums.reshape(-1))

    def names(self, cut: Int64Array, label: Int64Array) -> Int32Array:
        """Return the name of the chunk of each local cell, (n_local,) int32."""
        begin = np.arange(len(self.block_sums) - 1) << self.bits
        chunk = np.searchsorted(cut, begin, side="right") - 1
        end = np.minimum(begin + (1 << self.bits), self.n_items)
        chunk = np.where(cut[chunk + 1] < end, -1 - chunk, chunk).astype(np.int32)
        place = self.items.place
        part = np.empty(len(place), PART)
        given = place, cut, label.astype(PART), self.bits, chunk, part
        run_ranges(take_names, len(part), *given, smallest=1 << 18)
        return part


@dataclass(frozen=True, eq=False)
class _Items:
    """What the cells are on the line: each an item of its own, or those of a group one.

    Attributes
    ----------
    place : (n_local,) int32 or int64
        Item of each local cell, in the order of the line.
    home : (n_local,) int32
        Home of the item: that of a group's first cell.
    count : int
    heaviest : (2,) int64
        The most that a group weighs, and has of limited weight.
    """

    place: IntArray
    home: Int32Array
    count: int
    heaviest: Int64Array

    @classmethod
    def of(cls, task: Task, curve: CurveSlice) -> _Items:
        """Number the items."""
        problem, comm = task.problem, task.problem.comm
        if problem.group is None:
            count = int(comm.allreduce(np.array([len(problem.centers)], np.int64))[0])
            return cls(curve.position, task.home_part, count, np.zeros(2, np.int64))
        weight = None if problem.weight is None else curve.gather(problem.weight)
        limited = None if problem.limit_weight is None else curve.gather(problem.limit_weight)
        bundles = Bundles.of(
            curve.gather(problem.group), weight=weight, limit_weight=limited, comm=comm
        )
        own = np.array([len(bundles.name)], np.int64)
        first, count = int(comm.exscan(own)[0]), int(comm.allreduce(own)[0])
        dtype = index_dtype(count)
        place = curve.scatter(bundles.spread(np.arange(first, first + int(own[0]), dtype=dtype)))
        home = curve.scatter(bundles.spread(curve.gather(task.home_part)[bundles.item]))
        heaviest = [
            _or_none(values).max(initial=0) for values in (bundles.weight, bundles.limit_weight)
        ]
        return cls(place, home, count, comm.allreduce(np.array(heaviest, np.int64), "max"))


def _before(values: Int64Array) -> Int64Array:
    """Return the sums before each row and of all."""
    return np.concatenate([np.zeros_like(values[:1]), np.cumsum(values, axis=0)])


def _or_none(values: Int64Array | None) -> Int64Array:
    """Return values, or none of them as an array."""
    return _NONE if values is None else values


def _in_order_of_parts(curve: CurveSlice, task: Task) -> CurveSlice:
    """Order cells by the mean place of their old part, then along the curve."""
    comm, home, position = task.problem.comm, task.home_part, curve.position
    count = comm.allreduce(np.bincount(home, minlength=task.n_old_parts).astype(np.int64))
    total = np.zeros(task.n_old_parts, np.int64)
    np.add.at(total, home, position)
    mean = comm.allreduce(total) // np.maximum(count, 1)
    order = np.lexsort((np.arange(task.n_old_parts), mean))
    rank = np.empty(task.n_old_parts, np.int64)
    rank[order] = np.arange(task.n_old_parts)
    end = np.cumsum(count[order])
    wanted: Array = np.searchsorted(end, position, side="right")
    n_stray = int(comm.allreduce(np.array([np.count_nonzero(rank[home] != wanted)]))[0])
    n_cells = int(end[-1])
    if n_stray > _STRAY * n_cells:
        raise PartitionError(
            f"the old parts are no stretches of the curve: {n_stray} of {n_cells} cells lie "
            "outside the stretch of their part; re-split another way (smooth, scratch)"
        )
    return key_slice(rank[home] * n_cells + position, comm=comm)
