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

import numpy as np

from sfcpart.dtypes import Int32Array
from sfcpart.kernels.graph.contract import group_members
from sfcpart.kernels.graph.two_way import bisect_blocks
from sfcpart.kernels.threads import run_ranges
from sfcpart.methods.graph.aim import Aim
from sfcpart.methods.graph.coarsen import Level, WeightedGraph, hierarchy
from sfcpart.methods.graph.labels import cut_of, loads_of
from sfcpart.methods.graph.level import LARGE, Blocks, Effort, refine_level

__all__ = ["Aim", "divide", "improve", "rank_of"]

SMALLEST = 200
"""Vertices of the coarsest graph, four times as many for large ones, which are tried once only."""

BLOCK = 100
"""A block is split when blocks have about as many vertices (twice as many on large graphs)."""


def divide(graph: WeightedGraph, aim: Aim) -> Int32Array:
    """Return parts of a graph from scratch, (n,) int32."""
    if graph.n == 0 or aim.n_parts == 1:
        return np.zeros(graph.n, np.int32)
    levels = _levels(graph, np.zeros(graph.n, np.int32), aim)
    effort = Effort.on(graph.n)
    block = BLOCK if graph.n <= LARGE else 2 * BLOCK
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
                refine_level(level.graph, part, aim, blocks, finest=False, effort=effort)
        refine_level(level.graph, part, aim, blocks, finest=last, effort=effort)
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
    effort = Effort.on(graph.n)
    part = _project(levels, part)
    for depth in range(len(levels) - 1, -1, -1):
        level = levels[depth]
        if level.coarse_of is not None:
            part = part[level.coarse_of]
        refine_level(level.graph, part, aim, None, finest=depth == 0, effort=effort)
        levels.pop()
    return part if rank_of(graph, part, aim) <= rank_of(graph, start, aim) else start


def rank_of(graph: WeightedGraph, part: Int32Array, aim: Aim) -> tuple[int, int]:
    """What counts: first the overload, then the cut."""
    over = loads_of(graph, part, aim.n_parts) - aim.capacity
    return int(np.maximum(over, 0).sum()), cut_of(graph, part)


def _levels(graph: WeightedGraph, label: Int32Array, aim: Aim) -> list[Level]:
    """Coarsen inside labels; no vertex grows beyond what the coarsest graph can balance."""
    total = int(graph.vertex_weight.sum())
    smallest = SMALLEST if graph.n <= LARGE else 4 * SMALLEST
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


def _split_blocks(graph: WeightedGraph, part: Int32Array, blocks: Blocks, aim: Aim) -> Blocks:
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
