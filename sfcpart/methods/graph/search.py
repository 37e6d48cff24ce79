"""Several partitions of a graph, crossed until the budget is spent; small graphs get more.

The first ones come from scratch and from recursive bisection along far-apart vertices (or given
directions); then pairs are crossed: a hierarchy that merges only what both put together starts
from the better one, so the child is never worse.

Source: combining partitions, Sanders, Schulz, ALENEX 2012 (from memory).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from sfcpart.dtypes import Array, Int32Array
from sfcpart.methods.graph.coarsen import WeightedGraph
from sfcpart.methods.graph.labels import cut_of
from sfcpart.methods.graph.sweep import bisect_along, far_differences, least_cut
from sfcpart.methods.graph.vcycle import Aim, divide, improve, rank_of

__all__ = ["best_of_many"]

BUDGET = 3_500_000
"""Entries that all runs together may hold."""

MOST_RUNS = 40


def best_of_many(
    graph: WeightedGraph, aim: Aim, *, starts: int = 1, directions: Array | None = None
) -> Int32Array:
    """Return the best partition found, (n,) int32.

    Parameters
    ----------
    graph : WeightedGraph
    aim : Aim
    starts : int
        Multiplies the number of runs, which falls from 40 for small graphs to 1 for large ones.
    directions : (n, m) numbers, optional
        Along which blocks may be cut; differences of distances in the graph by default.
    """
    if graph.n == 0 or aim.n_parts == 1:
        return np.zeros(graph.n, np.int32)
    work = len(graph.indices) + graph.n
    runs = int(np.clip(BUDGET // work, 1, MOST_RUNS)) * starts
    found = [divide(graph, aim)]
    if 8 * cut_of(graph, found[0]) > graph.edge_weight.sum():  # much is cut: long borders cost
        runs = max(starts, runs // 8)
    size = runs if runs < 4 else max(starts, runs // 4)
    found += [divide(graph, _reseeded(aim, i)) for i in range(1, size)]
    if runs >= 4:
        found.append(_swept(graph, aim, directions))
    ranked = [(rank_of(graph, part, aim), part) for part in found]
    rng = np.random.default_rng((aim.seed, len(ranked)))
    for run in range(size, runs) if len(ranked) > 1 else ():
        i, j = rng.choice(len(ranked), 2, replace=False)
        if ranked[j][0] < ranked[i][0]:
            i, j = j, i
        child = improve(graph, ranked[i][1], _reseeded(aim, run), other=ranked[j][1])
        rank = rank_of(graph, child, aim)
        if rank < ranked[i][0]:
            ranked[j] = (rank, child)
    return min(ranked, key=lambda entry: entry[0])[1]


def _reseeded(aim: Aim, run: int) -> Aim:
    """Return the same aim with another seed."""
    return replace(aim, seed=aim.seed + 7919 * run)


def _swept(graph: WeightedGraph, aim: Aim, directions: Array | None) -> Int32Array:
    """Return an improved partition of recursive bisection."""
    table = far_differences(graph, n_far=8, seed=aim.seed) if directions is None else directions
    order_of = least_cut(graph, lambda members: table[members])
    return improve(graph, bisect_along(graph.vertex_weight, aim.share, order_of), aim)
