"""The cells of a problem as vertices of a weighted slice: items in curve order, over ranks.

A group of cells is one item, a free cell another; items are numbered along the Hilbert curve, and
each rank gets a stretch of them, whatever cells it holds. Rows of the cell graph are sent to the
ranks of their items once; parts come and go by the same way.

Cost: the curve, one exchange of the graph's entries (16 bytes each), one pass over them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array, IntArray, index_dtype
from sfcpart.errors import InputError
from sfcpart.graph import CellGraph
from sfcpart.kernels.graph.contract import group_members
from sfcpart.kernels.graph.copy_rows import copy_rows
from sfcpart.kernels.threads import run_ranges
from sfcpart.methods.problem import Problem
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice
from sfcpart.methods.together import Bundles
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.routing import Dealing, dealing, owner_of
from sfcpart.weights import face_weights

__all__ = ["CellItems"]


@dataclass(frozen=True, eq=False)
class CellItems:
    """The items of a problem, and the way from cells to items and back.

    Attributes
    ----------
    graph : WeightedSlice
        This rank's stretch of the items; edges weigh what `face_weight` asks for.
    limit_weight : (n,) int64 or None
    way : Dealing
        From the cells of this rank to the ranks of their items.
    item : (n_received,) int64
        Item of each cell that came, local.
    first_cell : (n,) int64
        Which of these is each item's first cell, by cell number.
    """

    graph: WeightedSlice
    limit_weight: Int64Array | None
    way: Dealing
    item: Int64Array
    first_cell: Int64Array

    @classmethod
    def of(cls, problem: Problem) -> CellItems:
        """Number the items and bring rows and weights to their ranks (collective).

        Raises
        ------
        InputError
            If the cell graph has other cells than the problem.
        """
        comm, cells = problem.comm, rows_of(problem)
        item_gid, offset = _numbered(problem)
        way = dealing(comm, owner_of(item_gid, offset))
        n = int(offset[comm.rank + 1] - offset[comm.rank])
        item = way.forward(item_gid) - offset[comm.rank]
        member_ptr, members = np.zeros(n + 1, np.int64), np.empty(len(item), np.int32)
        group_members(item, member_ptr, members)
        weight = np.ones(len(item_gid), np.int64) if problem.weight is None else problem.weight
        neighbour = cells.extend(item_gid.astype(index_dtype(int(offset[-1]))))[cells.indices]
        ptr, entries = _rows(way, cells.indptr, neighbour, member_ptr, members)
        if problem.face_weight == "count":
            widths = np.ones(len(entries), np.int64)
        else:
            faces = face_weights(cells.data, by=problem.face_weight, comm=comm)
            _, widths = _rows(way, cells.indptr, faces, member_ptr, members)
        if problem.group is not None:
            ptr, entries, widths = _without_loops(ptr, entries, widths, int(offset[comm.rank]))
        graph = WeightedSlice.of_rows(comm, ptr, entries, widths, _summed(way, weight, item, n))
        limit = problem.limit_weight
        limit = None if limit is None else _summed(way, limit, item, n)
        return cls(graph, limit, way, item, members[member_ptr[:-1]].astype(np.int64))

    def gather(self, cell_values: Array) -> Array:
        """Return a value of each item from those of the cells: that of its first cell."""
        return self.way.forward(cell_values)[self.first_cell]

    def spread(self, item_values: Array) -> Array:
        """Return the value of each of this rank's cells from those of the items."""
        return self.way.back(item_values[self.item])


def rows_of(problem: Problem) -> GraphSlice:
    """Return this rank's rows of the cell graph.

    Raises
    ------
    InputError
        If it has other cells than the problem (on all ranks).
    """
    given: CellGraph | GraphSlice = problem.graph()
    rows = given if isinstance(given, GraphSlice) else GraphSlice.whole(given)
    n, error = len(problem.centers), None
    if rows.n_local != n:
        error = InputError(f"the cell graph has {rows.n_local} cells, the problem {n}")
    problem.comm.check(error)
    return rows


def _numbered(problem: Problem) -> tuple[Int64Array, Int64Array]:
    """Return the item of each cell, numbered along the curve, and each rank's first item."""
    comm = problem.comm
    place = problem.place(problem.centers, curve="hilbert", comm=comm)
    n = len(place)
    if problem.group is not None:
        bundles = Bundles.of(place.gather(problem.group), weight=None, limit_weight=None, comm=comm)
        n = int(bundles.item.sum())
    sizes = np.concatenate(comm.allgather(np.array([n], np.int64)))
    offset = np.concatenate(([0], np.cumsum(sizes)))
    number = offset[comm.rank] + np.arange(n)
    if problem.group is not None:
        number = bundles.spread(number)
    return place.scatter(number), offset


def _rows(
    way: Dealing, indptr: Int64Array, data: Array, member_ptr: Int64Array, members: Int32Array
) -> tuple[Int64Array, Array]:
    """Send the rows of cells on their way and join those of each item."""
    came_ptr, came = way.forward_ragged(indptr, data)
    degree = np.diff(came_ptr)[members]
    row_ptr = np.concatenate(([0], np.cumsum(degree)))
    entries = np.empty(len(came), came.dtype)
    run_ranges(copy_rows, len(members), members, came_ptr, came, row_ptr, entries)
    return row_ptr[member_ptr], entries


def _without_loops(
    ptr: Int64Array, entries: IntArray, widths: Int64Array, first: int
) -> tuple[Int64Array, IntArray, Int64Array]:
    """Drop the entries from items to themselves."""
    row = np.repeat(first + np.arange(len(ptr) - 1), np.diff(ptr))
    keep = entries != row
    count = np.bincount(row[keep] - first, minlength=len(ptr) - 1)
    return np.concatenate(([0], np.cumsum(count))), entries[keep], widths[keep]


def _summed(way: Dealing, weight: Int64Array, item: Int64Array, n: int) -> Int64Array:
    """Return the weight of each item."""
    summed = np.zeros(n, np.int64)
    np.add.at(summed, item, way.forward(weight))
    return summed
