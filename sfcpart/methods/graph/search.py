"""Several partitions of a graph, improved until the budget is spent; small graphs get more.

The first ones come from scratch and from recursive bisection along far-apart vertices (or given
directions); then pairs are crossed: a hierarchy that merges only what both put together starts from
the better one, so the child is never worse. In the end the best is improved on its own.

Sources: iterated multilevel, Walshaw 2004; combining partitions, Sanders, Schulz, ALENEX 2012
(both from memory).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from sfcpart.dtypes import Array, Int32Array
from sfcpart.methods.graph.coarsen import WeightedGraph
from sfcpart.methods.graph.sweep import bisect_along, far_differences, least_cut
from sfcpart.methods.graph.vcycle import Aim, divide, improve, rank_of

__all__ = ["best_of_many"]

BUDGET = 1_200_000
"""Entries, times a price for long borders, that all runs together may hold."""

MOST_RUNS = 16

IDLE = 6
"""Runs without a better partition, times `starts`, after which no more are made."""


def best_of_many(
    graph: WeightedGraph, aim: Aim, *, starts: int = 1, directions: Array | None = None
) -> Int32Array:
    """Return the best partition found, (n,) int32.

    Parameters
    ----------
    graph : WeightedGraph
    aim : Aim
    starts : int
        Multiplies the number of runs, which falls from 16 for small graphs to 1 for large ones.
    directions : (n, m) numbers, optional
        Along which blocks may be cut; differences of distances in the graph by default.
    """
    if graph.n == 0 or aim.n_parts == 1:
        return np.zeros(graph.n, np.int32)
    found = [divide(graph, aim)]
    runs = _affordable(graph, found[0]) * starts
    if runs >= 6:
        found += [divide(graph, _reseeded(aim, i)) for i in range(1, max(2, runs // 4))]
        found.append(_swept(graph, aim, directions))
    ranked = [(rank_of(graph, part, aim), part) for part in found]
    return _evolved(graph, aim, ranked, runs=runs - len(ranked), idle=IDLE * starts)


def _affordable(graph: WeightedGraph, part: Int32Array) -> int:
    """Return how many runs the budget allows, given how much one cuts: long borders cost."""
    entries = len(graph.indices) + graph.n
    n_cut = int((part[graph.indices] != np.repeat(part, np.diff(graph.indptr))).sum())
    return int(np.clip(BUDGET / (0.3 * entries + 10.0 * n_cut), 1, MOST_RUNS))


def _evolved(
    graph: WeightedGraph,
    aim: Aim,
    ranked: list[tuple[tuple[int, int], Int32Array]],
    *,
    runs: int,
    idle: int,
) -> Int32Array:
    """Cross pairs of partitions, then improve the best on its own; return it."""
    rng = np.random.default_rng((aim.seed, len(ranked)))
    waited = 0
    for run in range(runs):
        i = j = min(range(len(ranked)), key=lambda x: ranked[x][0])
        if 4 * run < 3 * runs and len(ranked) > 1:
            i, j = sorted(rng.choice(len(ranked), 2, replace=False), key=lambda x: ranked[x][0])
        other = ranked[j][1] if i != j else None
        child = improve(graph, ranked[i][1], _reseeded(aim, 100 + run), other=other)
        rank = rank_of(graph, child, aim)
        waited = 0 if rank < min(entry[0] for entry in ranked) else waited + 1
        if rank < ranked[i][0]:
            ranked[j] = (rank, child)
        if waited == idle:
            break
    return min(ranked, key=lambda entry: entry[0])[1]


def _reseeded(aim: Aim, run: int) -> Aim:
    """Return the same aim with another seed."""
    return replace(aim, seed=aim.seed + 7919 * run)


def _swept(graph: WeightedGraph, aim: Aim, directions: Array | None) -> Int32Array:
    """Return an improved partition of recursive bisection."""
    table = far_differences(graph, n_far=8, seed=aim.seed) if directions is None else directions
    order_of = least_cut(graph, lambda members: table[members])
    return improve(graph, bisect_along(graph.vertex_weight, aim.share, order_of), aim)
