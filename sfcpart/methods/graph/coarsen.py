"""Coarser and coarser graphs: matching and contraction on integer-weighted CSR graphs.

Cost O(entries) a level; levels shrink by 0.5-0.6. Merged vertices always share a label, so a
hierarchy can respect a partition (labels are parts), several partitions, or nothing.

Source: multilevel partitioning with heavy-edge matching (Hendrickson, Leland 1995, from
memory); locally dominant edges instead of a random visiting order, so that threads cannot
change the result.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.kernels.graph.contract import compact_rows, group_members, merge_rows
from sfcpart.kernels.graph.matching import (
    accept_mutual,
    pair_in_turn,
    pair_leftovers,
    point_at_best,
)
from sfcpart.kernels.threads import run_ranges

__all__ = ["Level", "WeightedGraph", "coarsen", "contract", "hierarchy"]

ROUNDS = 5
"""Rounds of pointing and pairing; a sixth pairs under 2 % of the vertices of meshes."""

UNEVEN = 5
"""A merged vertex weighs at most this many times the mean of the graph that is coarsened."""


@dataclass(frozen=True, eq=False)
class WeightedGraph:
    """A symmetric graph without self-loops, integer weights on vertices and edges.

    Attributes
    ----------
    indptr : (n + 1,) int64
    indices : (n_entries,) int32
    edge_weight : (n_entries,) int64, > 0
    vertex_weight : (n,) int64, >= 0
    """

    indptr: Int64Array
    indices: Int32Array
    edge_weight: Int64Array
    vertex_weight: Int64Array

    @property
    def n(self) -> int:
        """Number of vertices."""
        return len(self.indptr) - 1


@dataclass(frozen=True, eq=False)
class Level:
    """A graph and, for each of its vertices, the vertex of the next coarser graph it went to."""

    graph: WeightedGraph
    coarse_of: Int32Array | None


def hierarchy(
    graph: WeightedGraph, label: Int32Array, *, smallest: int, heaviest: int, seed: int
) -> list[Level]:
    """Coarsen until `smallest` vertices are left or nothing can be merged; finest first.

    Parameters
    ----------
    graph : WeightedGraph
    label : (n,) int32
        Only vertices of the same label are merged.
    smallest : int
        Stop at this many vertices.
    heaviest : int
        No merged vertex weighs more, nor more than a few times the mean on its level.
    seed : int
        Breaks ties between equally heavy edges.
    """
    levels: list[Level] = []
    total = int(graph.vertex_weight.sum())
    while graph.n > smallest:
        even = UNEVEN * total // graph.n + 1
        coarse_of, n_coarse = coarsen(
            graph, label, heaviest=min(heaviest, even), seed=seed + len(levels)
        )
        if n_coarse > 0.95 * graph.n:
            break
        levels.append(Level(graph, coarse_of))
        coarse_label = np.empty(n_coarse, np.int32)
        coarse_label[coarse_of] = label
        graph, label = contract(graph, coarse_of, n_coarse), coarse_label
    levels.append(Level(graph, None))
    return levels


def coarsen(
    graph: WeightedGraph, label: Int32Array, *, heaviest: int, seed: int
) -> tuple[Int32Array, int]:
    """Pair vertices of equal label; return the coarse vertex of each and their number."""
    mate = np.full(graph.n, -1, np.int32)
    choice = np.full(graph.n, -1, np.int32)
    free = np.arange(graph.n, dtype=np.int32)
    rows = (graph.indptr, graph.indices, graph.edge_weight, graph.vertex_weight, label)
    for turn in range(ROUNDS):
        run_ranges(
            point_at_best, len(free), free, *rows, mate, heaviest, seed * ROUNDS + turn, choice
        )
        paired = sum(run_ranges(accept_mutual, len(free), free, choice, mate))
        free = free[mate[free] < 0]
        if paired * 50 < graph.n or len(free) == 0:
            break
    if len(free) * 4 > graph.n:
        pair_in_turn(free, *rows, mate, heaviest, seed)
        waiting = np.full(graph.n + 1, -1, np.int32)
        pair_leftovers(free, *rows, mate, heaviest, waiting)
    return _number_pairs(mate)


def _number_pairs(mate: Int32Array) -> tuple[Int32Array, int]:
    """Number pairs and single vertices by their first member."""
    vertex = np.arange(len(mate), dtype=np.int32)
    first = np.where((mate >= 0) & (mate < vertex), mate, vertex)
    number = np.cumsum(first == vertex, dtype=np.int32) - np.int32(1)
    return number[first], int(number[-1]) + 1 if len(mate) else 0


def contract(graph: WeightedGraph, coarse_of: Int32Array, n_coarse: int) -> WeightedGraph:
    """Return the graph of merged vertices: weights add up, self-loops vanish."""
    member_ptr = np.zeros(n_coarse + 1, np.int64)
    members = np.empty(graph.n, np.int32)
    group_members(coarse_of, member_ptr, members)
    degree = np.diff(graph.indptr)[members]
    room_ptr = np.concatenate([[0], np.cumsum(degree)])[member_ptr]
    room_index = np.empty(len(graph.indices), np.int32)
    room_weight = np.empty(len(graph.indices), np.int64)
    n_entries = np.zeros(n_coarse, np.int64)
    run_ranges(
        merge_rows, n_coarse, member_ptr, members, coarse_of, graph.indptr, graph.indices,
        graph.edge_weight, room_ptr, room_index, room_weight, n_entries,
    )  # fmt: skip
    indptr = np.zeros(n_coarse + 1, np.int64)
    np.cumsum(n_entries, out=indptr[1:])
    indices = np.empty(indptr[-1], np.int32)
    edge_weight = np.empty(indptr[-1], np.int64)
    run_ranges(
        compact_rows, n_coarse, room_ptr, room_index, room_weight, indptr, indices, edge_weight
    )
    weight = np.add.reduceat(graph.vertex_weight[members], member_ptr[:-1])
    return WeightedGraph(indptr, indices, edge_weight, weight)
