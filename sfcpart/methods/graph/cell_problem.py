"""A problem as graph methods see it: an integer-weighted graph of items in curve order.

All ranks gather the whole problem and compute the same answer from it, so it does not depend on
their number; the graph methods do not share their work among ranks yet.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.curve import curve_order
from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.errors import InputError, PartitionError
from sfcpart.graph import CellGraph
from sfcpart.methods.graph.coarsen import WeightedGraph, contract
from sfcpart.methods.problem import Problem
from sfcpart.weights import face_weights

__all__ = ["CellProblem", "limits_kept", "permuted"]


@dataclass(frozen=True, eq=False)
class CellProblem:
    """The whole problem: one item for each group and each free cell.

    Attributes
    ----------
    graph : WeightedGraph
        Items in curve order (of their first cells); edges weigh what
        `face_weight` asks for.
    item_of : (n_cells,) int32
        Item of each cell.
    limit_weight : (n_items,) int64 or None
    slice : slice
        This rank's cells.
    """

    graph: WeightedGraph
    item_of: Int32Array
    limit_weight: Int64Array | None
    slice: slice

    @classmethod
    def of(cls, problem: Problem) -> CellProblem:
        """Gather, order and contract a problem.

        Raises
        ------
        InputError
            If the cell graph has other cells than the problem.
        PartitionError
            If groups leave fewer items than parts while there are cells enough.
        """
        centers = _whole(problem, problem.centers)
        n = len(centers)
        weight = np.ones(n, np.int64) if problem.weight is None else _whole(problem, problem.weight)
        order = curve_order(centers)
        place = np.empty(n, np.int32)
        place[order] = np.arange(n, dtype=np.int32)
        cells = problem.graph()
        if cells.n_cells != n:
            raise InputError(f"the cell graph has {cells.n_cells} cells, the problem {n}")
        graph = permuted(_weighted(cells, weight, problem), order, place)
        limit = None
        if problem.limit_weight is not None:
            limit = _whole(problem, problem.limit_weight)[order]
        mine = slice(problem.first_gid, problem.first_gid + len(problem.centers))
        if problem.group is None:
            return cls(graph, place, limit, mine)
        item, n_items = _items(_whole(problem, problem.group)[order])
        if n_items < problem.n_parts <= n:
            raise PartitionError(
                f"groups leave {n_items} items for {problem.n_parts} parts; "
                "ask for fewer parts or smaller groups"
            )
        if limit is not None:
            item_limit = np.zeros(n_items, np.int64)
            np.add.at(item_limit, item, limit)
            limit = item_limit
        return cls(contract(graph, item, n_items), item[place], limit, mine)

    def spread(self, item_part: Int32Array) -> Int32Array:
        """Return the part of each of this rank's cells."""
        return item_part[self.item_of[self.slice]]

    def gather(self, cell_part: Int32Array) -> Int32Array:
        """Return the part of each item from those of all cells (one of them, if they differ)."""
        part = np.empty(self.graph.n, np.int32)
        part[self.item_of] = cell_part
        return part


def limits_kept(problem: Problem, cells: CellProblem, part: Int32Array) -> bool:
    """Whether no part holds more of the limited weight than it may."""
    if cells.limit_weight is None or problem.part_limit is None:
        return True
    held = np.zeros(problem.n_parts, np.int64)
    np.add.at(held, part, cells.limit_weight)
    return bool(np.all(held <= problem.part_limit))


def _weighted(cells: CellGraph, weight: Int64Array, problem: Problem) -> WeightedGraph:
    """Return the cell graph with integer weights of faces as the problem wants them."""
    indices = cells.indices.astype(np.int32, copy=False)
    faces = face_weights(cells.data, by=problem.face_weight)
    return WeightedGraph(cells.indptr, indices, np.maximum(faces, 1), weight)


def permuted(graph: WeightedGraph, order: Int64Array, place: Int32Array) -> WeightedGraph:
    """Return the graph with vertex `order[i]` at place i (`place` is the inverse)."""
    degree = np.diff(graph.indptr)[order]
    indptr = np.concatenate([[0], np.cumsum(degree)]).astype(np.int64)
    entry = np.arange(indptr[-1]) + np.repeat(graph.indptr[order] - indptr[:-1], degree)
    return WeightedGraph(
        indptr, place[graph.indices[entry]], graph.edge_weight[entry], graph.vertex_weight[order]
    )


def _whole(problem: Problem, values: Array) -> Array:
    """Join the ranks' slices."""
    return np.concatenate(problem.comm.allgather(values))


def _items(group: Int64Array) -> tuple[Int32Array, int]:
    """Number groups and free cells by their first cell."""
    n = len(group)
    first = np.arange(n)
    grouped = np.flatnonzero(group >= 0)
    if len(grouped):
        _, where, inverse = np.unique(group[grouped], return_index=True, return_inverse=True)
        first[grouped] = grouped[where][inverse]
    number = np.cumsum(first == np.arange(n)) - 1
    return number[first].astype(np.int32), int(number[-1]) + 1 if n else 0
