"""Multilevel k-way partition of a graph: coarsen, split step by step, refine on every level.

The coarsest graph is one block that stands for all parts. On the way back to finer graphs every
block is split in two as soon as the graph has vertices enough for it (best of several growings,
each refined), and after every step all borders between blocks are refined: short local searches,
then flows between neighbouring parts. Further cycles coarsen again inside the parts and refine
anew. Cost O(entries) a cycle for bounded degrees; memory about 150 bytes a vertex of degree 4
beyond the graph.

Sources: multilevel partitioning, Hendrickson, Leland 1995; blocks split on the way up,
Gottesbueren et al., ESA 2021; iterated multilevel, Walshaw 2004; crossing of
partitions by coarsening inside both, Sanders, Schulz, ALENEX 2012 (all from memory).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int32Array, Int64Array
from sfcpart.kernels.graph.contract import group_members
from sfcpart.kernels.graph.two_way import bisect_blocks
from sfcpart.kernels.threads import run_ranges
from sfcpart.methods.graph.balance import fill_empty_parts, join_pieces, rebalance
from sfcpart.methods.graph.coarsen import Level, WeightedGraph, hierarchy
from sfcpart.methods.graph.labels import Labels, boundary_of, cut_of, loads_of
from sfcpart.methods.graph.refine import flow_between, refine_between, search_locally

__all__ = ["Aim", "divide", "improve", "rank_of"]

SMALLEST = 800
"""Vertices of the coarsest graph."""

BLOCK = 100
"""A block is split when blocks have about as many vertices (twice as many on large graphs)."""

SMALL = 200_000
"""Graphs up to this many vertices are refined in up to `MANY` sweeps a level, larger ones in 1."""

MANY = 5

LOOSER = 1.5
"""Excess on coarse graphs as a multiple of that allowed in the end: full parts hinder flows."""

ROOMY = 1500
"""Large graphs with more vertices a part are refined by flows alone: local searches cost a fifth
of the time there and bring nothing that can be measured."""

TINY = 500
"""Parts of fewer vertices, on large graphs, have their borders refined in narrower bands."""

RELAX = 0.06
"""Excess that parts may have on coarse graphs, so that full parts can exchange vertices."""


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
        whole = np.ceil(share - 1e-12 * share).astype(np.int64)
        if np.all(speed == speed[0]):
            whole[:] = -(-total // len(speed))
        most = np.floor((1.0 + tolerance) * whole + 1e-9).astype(np.int64)
        capacity = np.maximum(most, whole)
        return cls(share, capacity, seed)

    @property
    def n_parts(self) -> int:
        """Number of parts."""
        return len(self.share)

    def relaxed(self, heaviest: int) -> Int64Array:
        """Return capacities for coarse vertices: what full parts need to exchange any."""
        extra = np.minimum(heaviest, RELAX * self.share)
        loose = np.maximum(self.share + extra, self.share + LOOSER * (self.capacity - self.share))
        return np.maximum(self.capacity, loose.astype(np.int64))

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


def divide(graph: WeightedGraph, aim: Aim) -> Int32Array:
    """Return parts of a graph from scratch, (n,) int32."""
    if graph.n == 0 or aim.n_parts == 1:
        return np.zeros(graph.n, np.int32)
    levels = _levels(graph, np.zeros(graph.n, np.int32), aim)
    sweeps = MANY if graph.n <= SMALL else 1
    block = BLOCK if sweeps > 1 else 2 * BLOCK
    part = np.zeros(levels[-1].graph.n, np.int32)
    blocks = [(0, aim.n_parts)]
    for depth in range(len(levels) - 1, -1, -1):
        level = levels[depth]
        if level.coarse_of is not None:
            part = part[level.coarse_of]
        n, last = level.graph.n, depth == 0
        while len(blocks) < aim.n_parts and (last or n >= block * len(blocks)):
            blocks = _split_blocks(level.graph, part, blocks, aim)
            if len(blocks) < aim.n_parts:
                _refine(level.graph, part, aim, blocks, finest=False, sweeps=sweeps)
        _refine(level.graph, part, aim, blocks, finest=last, sweeps=sweeps)
        levels.pop()
    return part


def improve(
    graph: WeightedGraph, part: Int32Array, aim: Aim, *, other: Int32Array | None = None
) -> Int32Array:
    """Improve a partition through a hierarchy that respects it; never worse, (n,) int32.

    With another partition the hierarchy respects both, so that what is good in either can win.
    """
    start = part
    label = part
    if other is not None:
        _, both = np.unique(part.astype(np.int64) * aim.n_parts + other, return_inverse=True)
        label = both.astype(np.int32)
    levels = _levels(graph, label, aim)
    sweeps = MANY if graph.n <= SMALL else 1
    part = _project(levels, part)
    for depth in range(len(levels) - 1, -1, -1):
        level = levels[depth]
        if level.coarse_of is not None:
            part = part[level.coarse_of]
        _refine(level.graph, part, aim, None, finest=depth == 0, sweeps=sweeps)
        levels.pop()
    return part if rank_of(graph, part, aim) <= rank_of(graph, start, aim) else start


def rank_of(graph: WeightedGraph, part: Int32Array, aim: Aim) -> tuple[int, int]:
    """What counts: first the overload, then the cut."""
    over = loads_of(graph, part, aim.n_parts) - aim.capacity
    return int(np.maximum(over, 0).sum()), cut_of(graph, part)


def _levels(graph: WeightedGraph, label: Int32Array, aim: Aim) -> list[Level]:
    """Coarsen inside labels; no vertex grows beyond what the coarsest graph can balance."""
    total = int(graph.vertex_weight.sum())
    heaviest = max(1, total * 3 // (2 * SMALLEST), int(graph.vertex_weight.max(initial=0)))
    return hierarchy(graph, label, smallest=SMALLEST, heaviest=heaviest, seed=aim.seed)


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
    blocks: list[tuple[int, int]] | None,
    *,
    finest: bool,
    sweeps: int,
) -> None:
    """Refine one level in place; without blocks the labels are final parts and keep capacities."""
    heaviest = int(graph.vertex_weight.max())
    capacity = aim.capacity
    if not finest:
        apart = blocks is None or len(blocks) == aim.n_parts
        capacity = aim.relaxed(heaviest)
        if blocks is not None and not apart:
            capacity = aim.of_blocks(blocks, heaviest)
    labels = Labels(graph, part, capacity)
    rebalance(labels)
    size = graph.n / (len(blocks) if blocks else aim.n_parts)
    if sweeps > 1 or size < ROOMY:
        search_locally(labels, rounds=sweeps, patience=6 if sweeps == 1 else 15, seed=aim.seed)
    few = 8 * len(boundary_of(labels)) < graph.n  # then another sweep costs little
    depth, stretch = (4 if size > TINY else 2, 16.0) if sweeps == 1 else (3, 4.0)
    flow_between(labels, sweeps=max(sweeps, 2) if few else sweeps, depth=depth, stretch=stretch)
    tight = float((aim.capacity - aim.share).max(initial=0.0)) < 4 * heaviest
    if sweeps > 1 or (tight and finest):
        turns, patience = (3, 200) if sweeps > 1 else (1, 20)
        refine_between(labels, sweeps=turns, patience=patience, slack=heaviest if tight else 0)
    if finest and (blocks is None or len(blocks) == aim.n_parts):
        join_pieces(labels)
        fill_empty_parts(labels)
