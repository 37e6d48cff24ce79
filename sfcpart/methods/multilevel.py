"""Multilevel k-way partition of a graph: coarsen, split step by step, refine on every level.

The coarsest graph is one block that stands for all parts. On the way back to finer graphs every
block is split in two as soon as the graph has vertices enough for it (best of several growings,
each refined), and after every step all borders between blocks are refined: short local searches,
then flows between neighbouring parts. Further cycles coarsen again inside the parts and refine
anew. Cost O(entries) a cycle for bounded degrees; memory about 150 bytes a vertex of degree 4
beyond the graph.

Sources: multilevel partitioning, Hendrickson, Leland 1995; blocks split on the way up,
Gottesbueren et al., ESA 2021; iterated multilevel, Walshaw 2004 (all from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import FloatArray, Int32Array, Int64Array
from sfcpart.errors import InputError
from sfcpart.kernels.contract import group_members
from sfcpart.kernels.threads import run_ranges
from sfcpart.kernels.two_way import bisect_blocks
from sfcpart.methods.balance import fill_empty_parts, join_pieces, rebalance
from sfcpart.methods.coarsen import Level, WeightedGraph, hierarchy
from sfcpart.methods.labels import Labels, cut_of, loads_of
from sfcpart.methods.refine import flow_between, refine_between, search_locally

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

__all__ = ["Aim", "divide", "improve", "split_graph"]

SMALLEST = 200
"""Vertices of the coarsest graph; a block is split when it has about as many."""


@dataclass(frozen=True, eq=False)
class Aim:
    """What the parts should weigh.

    Attributes
    ----------
    share : (n_parts,) float64
        Wanted weight of each part.
    capacity : (n_parts,) int64
        The most it may weigh.
    seed : int
    """

    share: FloatArray
    capacity: Int64Array
    seed: int = 0

    @classmethod
    def of(cls, total: int, speed: FloatArray, tolerance: float, seed: int = 0) -> Aim:
        """Divide a total weight by speeds: at most (1 + tolerance) of the share, rounded up."""
        share = total * (speed / speed.sum())
        whole = np.ceil(share - 1e-9 * np.maximum(share, 1.0))
        capacity = np.maximum(np.floor((1.0 + tolerance) * whole + 1e-9), whole).astype(np.int64)
        return cls(share, capacity, seed)

    @property
    def n_parts(self) -> int:
        """Number of parts."""
        return len(self.share)

    def of_blocks(self, blocks: list[tuple[int, int]], heaviest: int) -> Int64Array:
        """Return the capacity of each block (at its first part), with room for coarse vertices.

        A block of m parts gets a share of the tolerance that leaves as much for each of the
        log2(m) splits to come.
        """
        capacity = np.zeros(self.n_parts, np.int64)
        for low, high in blocks:
            share = float(self.share[low:high].sum())
            most = float(self.capacity[low:high].sum())
            splits = int(np.ceil(np.log2(high - low)))
            excess = max(1.0, most / share) ** (1.0 / (1 + splits)) if share > 0 else 1.0
            tight = int(np.ceil(share * excess)) if high - low > 1 else int(most)
            capacity[low] = max(tight, int(share) + heaviest)
        return capacity


def divide(graph: WeightedGraph, aim: Aim, *, cycles: int = 0) -> Int32Array:
    """Return parts of a graph from scratch, (n,) int32.

    Parameters
    ----------
    graph : WeightedGraph
    aim : Aim
    cycles : int
        Further multilevel cycles that start from the partition found.
    """
    if graph.n == 0 or aim.n_parts == 1:
        return np.zeros(graph.n, np.int32)
    levels = _levels(graph, np.zeros(graph.n, np.int32), aim)
    part = np.zeros(levels[-1].graph.n, np.int32)
    blocks = [(0, aim.n_parts)]
    for depth in range(len(levels) - 1, -1, -1):
        level = levels[depth]
        if level.coarse_of is not None:
            part = part[level.coarse_of]
        n, last = level.graph.n, depth == 0
        while len(blocks) < aim.n_parts and (last or n >= SMALLEST * len(blocks)):
            blocks = _split_blocks(level.graph, part, blocks, aim)
            if len(blocks) < aim.n_parts:
                _refine(level.graph, part, aim, blocks, finest=False)
        _refine(level.graph, part, aim, blocks, finest=last)
        levels.pop()
    for cycle in range(cycles):
        part = improve(graph, part, Aim(aim.share, aim.capacity, aim.seed + 7919 * (cycle + 1)))
    return part


def improve(graph: WeightedGraph, part: Int32Array, aim: Aim) -> Int32Array:
    """Improve a partition through a hierarchy that respects it; never worse, (n,) int32."""
    start = part
    levels = _levels(graph, part, aim)
    part = _project(levels, part)
    blocks = [(p, p + 1) for p in range(aim.n_parts)]
    for depth in range(len(levels) - 1, -1, -1):
        level = levels[depth]
        if level.coarse_of is not None:
            part = part[level.coarse_of]
        _refine(level.graph, part, aim, blocks, finest=depth == 0)
        levels.pop()
    return part if _rank(graph, part, aim) <= _rank(graph, start, aim) else start


def _rank(graph: WeightedGraph, part: Int32Array, aim: Aim) -> tuple[int, int]:
    """What counts: first the overload, then the cut."""
    over = loads_of(graph, part, aim.n_parts) - aim.capacity
    return int(np.maximum(over, 0).sum()), cut_of(graph, part)


def _levels(graph: WeightedGraph, label: Int32Array, aim: Aim) -> list[Level]:
    """Coarsen inside labels; no vertex grows beyond what the coarsest graph can balance."""
    total = int(graph.vertex_weight.sum())
    smallest = SMALLEST if label.max(initial=0) == 0 else max(SMALLEST, 20 * aim.n_parts)
    heaviest = max(1, total * 3 // (2 * smallest), int(graph.vertex_weight.max(initial=0)))
    return hierarchy(graph, label, smallest=smallest, heaviest=heaviest, seed=aim.seed)


def _project(levels: list[Level], part: Int32Array) -> Int32Array:
    """Carry labels to the coarsest graph."""
    for level in levels:
        if level.coarse_of is not None:
            coarse = np.empty(int(level.coarse_of.max()) + 1, np.int32)
            coarse[level.coarse_of] = part
            part = coarse
    return part.copy()


def _split_blocks(
    graph: WeightedGraph, part: Int32Array, blocks: list[tuple[int, int]], aim: Aim
) -> list[tuple[int, int]]:
    """Split every block of several parts in two; return the new blocks."""
    wide = [block for block in blocks if block[1] - block[0] > 1]
    halves = [(low, (low + high + 1) // 2, high) for low, high in wide]
    new = sorted(
        [block for block in blocks if block[1] - block[0] == 1]
        + [(low, mid) for low, mid, _ in halves]
        + [(mid, high) for _, mid, high in halves]
    )
    load = loads_of(graph, part, aim.n_parts)
    goal = [
        round(load[low] * aim.share[low:mid].sum() / max(aim.share[low:high].sum(), 1e-300))
        for low, mid, high in halves
    ]
    place = np.full(aim.n_parts, len(wide), np.int32)
    place[[low for low, _ in wide]] = np.arange(len(wide))
    member_ptr, members = np.zeros(len(wide) + 2, np.int64), np.empty(graph.n, np.int32)
    group_members(place[part], member_ptr, members)
    capacity = aim.of_blocks(new, int(graph.vertex_weight.max()))
    tries = max(2, min(16, 200_000 // graph.n))
    run_ranges(
        bisect_blocks, len(wide), np.array([h[0] for h in halves], np.int32),
        np.array([h[1] for h in halves], np.int32), np.array(goal, np.int64), member_ptr, members,
        graph.indptr, graph.indices, graph.edge_weight, graph.vertex_weight, part, load, capacity,
        np.empty(graph.n, np.int64), np.full(graph.n, -1, np.int32), tries, 4, aim.seed,
        smallest=1,
    )  # fmt: skip
    return new


def _refine(
    graph: WeightedGraph,
    part: Int32Array,
    aim: Aim,
    blocks: list[tuple[int, int]],
    *,
    finest: bool,
) -> None:
    """Refine one level in place."""
    heaviest = int(graph.vertex_weight.max())
    capacity = aim.capacity if finest else aim.of_blocks(blocks, heaviest)
    labels = Labels(graph, part, capacity)
    rebalance(labels)
    tight = float((capacity - aim.share).max(initial=0.0)) < 4 * heaviest and len(blocks) > 1
    search_locally(labels, rounds=FM[0], patience=FM[1], seed=aim.seed)
    flow_between(labels, sweeps=FLOW[0], depth=FLOW[1], stretch=FLOW[2])
    if tight or graph.n < PAIR:
        refine_between(labels, sweeps=3, patience=200, slack=heaviest if tight else 0)
    if finest and len(blocks) == aim.n_parts:
        join_pieces(labels)
        fill_empty_parts(labels)


FM = [1, 6]
FLOW = [1, 3, 4.0]
PAIR = 0


def split_graph(
    adjacency: Any,
    n_parts: int,
    *,
    tolerance: float = 0.03,
    vertex_weight: ArrayLike | None = None,
    seed: int = 0,
    starts: int = 1,
) -> Int32Array:
    """Divide the vertices of a graph into parts of equal weight with few edges between them.

    Parameters
    ----------
    adjacency : (n, n) sparse matrix or array of scipy, or CellGraph
        Symmetric. Values are edge weights >= 0: integers as they are, others quantised to 20
        bits; explicit zeros and the diagonal are ignored.
    n_parts : int
        1 <= n_parts.
    tolerance : float
        No part weighs more than (1 + tolerance) times the mean weight rounded up, where vertex
        weights allow it; 0 is honoured for unit weights.
    vertex_weight : (n,) integers >= 0, optional
        1 each by default.
    seed : int
    starts : int
        Independent tries; the best is returned.

    Returns
    -------
    (n,) int32
        Part of each vertex. A part is empty only if there are fewer vertices than parts. The same
        for any number of threads.

    Raises
    ------
    InputError
        If the matrix is not square and symmetric, or an option is out of range.
    WeightError
        If vertex or edge weights are negative or no numbers.

    Notes
    -----
    O(entries) for bounded degrees.

    Examples
    --------
    >>> from scipy.sparse import diags_array
    >>> path = diags_array([1, 1], offsets=[-1, 1], shape=(6, 6), dtype=int)
    >>> part = split_graph(path, 2, tolerance=0.0)
    >>> sorted([part[:3].tolist(), part[3:].tolist()])
    [[0, 0, 0], [1, 1, 1]]
    """
    from sfcpart.methods.any_graph import graph_of_matrix, in_walk_order

    graph = graph_of_matrix(adjacency, vertex_weight)
    if isinstance(n_parts, bool) or not isinstance(n_parts, int | np.integer) or n_parts < 1:
        raise InputError(f"n_parts is {n_parts!r}; wanted a whole number, at least 1")
    if not (np.isfinite(tolerance) and tolerance >= 0):
        raise InputError(f"tolerance is {tolerance!r}; wanted a number >= 0, such as 0.03")
    if isinstance(starts, bool) or not isinstance(starts, int | np.integer) or starts < 1:
        raise InputError(f"starts is {starts!r}; wanted a whole number, at least 1")
    walked, place = in_walk_order(graph)
    total = int(graph.vertex_weight.sum())
    best, best_rank = np.zeros(graph.n, np.int32), None
    for start in range(int(starts)):
        aim = Aim.of(total, np.ones(int(n_parts)), float(tolerance), int(seed) + 104_729 * start)
        part = divide(walked, aim, cycles=_cycles(graph))
        rank = _rank(walked, part, aim)
        if best_rank is None or rank < best_rank:
            best, best_rank = part, rank
    return best[place]


def _cycles(graph: WeightedGraph) -> int:
    """More cycles where they are cheap."""
    return int(np.clip(2_000_000 // max(1, len(graph.indices) + graph.n), 0, 6))
