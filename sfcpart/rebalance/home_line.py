"""The cells along the curve as the old split left them: one stretch of the line a part.

An old split by chunks of the same curve is one stretch a part. Where the mesh was refined since,
the box around the centres is another, and some cells near the cuts change sides; where few did,
the line is put in order by old part first and place on the curve second, so that every part is
one stretch again.

Cost: two gathers along the curve; a sort if stretches were mended.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.curve import CURVES, CurveSlice, key_slice
from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.errors import PartitionError
from sfcpart.methods.curve.line import Line
from sfcpart.methods.together import Bundles
from sfcpart.rebalance.task import Task

__all__ = ["HomeLine"]

_STRAY = 0.05
"""Share of the cells that may lie outside the stretch of their part and still be mended."""


@dataclass(frozen=True, eq=False)
class HomeLine:
    """A line of items and the stretch of it that each old part holds.

    Attributes
    ----------
    line : Line
    label : (n_runs,) int64
        Old parts in the order of their stretches.
    start : (n_runs + 1,) int64
        First position of each stretch; the number of items at the end.
    place : CurveSlice
    bundles : Bundles or None
        Groups, if there are any.
    """

    line: Line
    label: Int64Array
    start: Int64Array
    place: CurveSlice
    bundles: Bundles | None

    @classmethod
    def of(cls, task: Task) -> HomeLine:
        """Lay the cells out along the curve.

        Raises
        ------
        PartitionError
            If the old parts are no stretches of the curve.
        """
        problem = task.problem
        curve = next((name for name in CURVES if name == task.method), "hilbert")
        place = problem.place(problem.centers, curve=curve, comm=problem.comm)
        home = place.gather(task.home_part)
        runs = _runs(home, task)
        if len(runs[0]) > len(np.unique(runs[0])):
            place = _in_order_of_parts(home, place, task)
            home = place.gather(task.home_part)
        return cls._laid(task, place, home)

    @classmethod
    def _laid(cls, task: Task, place: CurveSlice, home: Int32Array) -> HomeLine:
        """Bundle groups, add up weights, find the stretches."""
        problem = task.problem
        weight = None if problem.weight is None else place.gather(problem.weight)
        limited = None if problem.limit_weight is None else place.gather(problem.limit_weight)
        bundles = None
        if problem.group is not None:
            group = place.gather(problem.group)
            bundles = Bundles.of(group, weight=weight, limit_weight=limited, comm=problem.comm)
            home, weight, limited = home[bundles.item], bundles.weight, bundles.limit_weight
        line = Line.of(
            len(home),
            weight=weight,
            limit_weight=limited,
            reach=2,
            comm=problem.comm,
            limit_unit=problem.limit_unit,
        )
        label, start = _runs(home, task)
        return cls(line, label, np.append(start, line.n_items), place, bundles)

    def scatter(self, item_part: Int32Array) -> Int32Array:
        """Give the cells in file order the parts of their items."""
        part = item_part if self.bundles is None else self.bundles.spread(item_part)
        return np.asarray(self.place.scatter(part))


def _runs(home: Int32Array, task: Task) -> tuple[Int64Array, Int64Array]:
    """Return part and first position of the stretches with one home, over all ranks.

    Far more of them than parts are cut short: that they repeat is all there is to know then.
    """
    comm = task.problem.comm
    first = int(comm.exscan(np.array([len(home)], np.int64))[0])
    change = np.flatnonzero(home[1:] != home[:-1]) + 1
    begin = np.append(0, change)[: len(home) + 1 if len(home) else 0]
    begin = begin[: task.n_old_parts + 1]
    found = np.column_stack([home[begin], begin + first]).astype(np.int64).reshape(-1, 2)
    label, start = np.concatenate(comm.allgather(found)).T
    new = np.append(True, label[1:] != label[:-1])[: len(label)]
    return label[new], start[new]


def _in_order_of_parts(home: Int32Array, place: CurveSlice, task: Task) -> CurveSlice:
    """Order cells by the mean place of their old part, then along the curve."""
    comm = task.problem.comm
    first = int(comm.exscan(np.array([len(home)], np.int64))[0])
    position = np.arange(first, first + len(home))
    count = comm.allreduce(np.bincount(home, minlength=task.n_old_parts).astype(np.int64))
    total = np.zeros(task.n_old_parts, np.int64)
    np.add.at(total, home, position)
    mean = comm.allreduce(total) // np.maximum(count, 1)
    order = np.lexsort((np.arange(task.n_old_parts), mean))
    rank = np.empty(task.n_old_parts, np.int64)
    rank[order] = np.arange(task.n_old_parts)
    end = np.cumsum(count[order])
    wanted = np.searchsorted(end, position, side="right")
    n_stray = int(comm.allreduce(np.array([np.count_nonzero(rank[home] != wanted)]))[0])
    n_cells = int(end[-1])
    if n_stray > _STRAY * n_cells:
        raise PartitionError(
            f"the old parts are no stretches of the curve: {n_stray} of {n_cells} cells lie "
            "outside the stretch of their part; re-split another way (smooth, scratch)"
        )
    at: Array = place.scatter(position)
    return key_slice(rank[task.home_part] * n_cells + at, comm=comm)
