"""Smoothing as a way to split a mesh over ranks: speeds, groups, limits and nested levels included.

Edges count faces, or weigh their quantised measures (`face_weight`). Groups are single vertices.
With nested levels borders move inside the parts of the upper levels only. A limit on a second
weight is first left alone; if the parts break it, the larger of both weights (each relative to what
a part may hold) is balanced instead.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from sfcpart.dtypes import FloatArray, Int32Array, Int64Array
from sfcpart.errors import PartitionError
from sfcpart.methods.curve.along_curve import along_hilbert
from sfcpart.methods.problem import Problem
from sfcpart.methods.smoothing.cell_items import CellItems
from sfcpart.methods.smoothing.smooth import smooth_slice
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice

__all__ = ["capacities", "smooth_problem", "smoothed"]

FINE = 20
"""Bits of a weight relative to what a part may hold."""


def smoothed(problem: Problem) -> Int32Array:
    """Return the part of each local cell: chunks of the Hilbert curve with smoothed borders.

    Parameters
    ----------
    problem : Problem

    Returns
    -------
    (n_local,) int32
        Cuts no more faces than the `hilbert` method, with parts no heavier than the tolerance
        allows (or than its heaviest, if it exceeds that). The same for any number of ranks and
        threads.

    Raises
    ------
    InputError, PartitionError
        As `smooth_problem`, and as the `hilbert` method.
    """
    return smooth_problem(problem, along_hilbert(replace(problem, cuts="balanced")))


def smooth_problem(problem: Problem, start: Int32Array) -> Int32Array:
    """Return the smoothed parts of this rank's cells (collective).

    Parameters
    ----------
    problem : Problem
    start : (n_local,) int32
        0 <= part < n_parts. Of a group the part of its first cell counts.

    Returns
    -------
    (n_local,) int32
        Costs no more than the start, unless that weighs too much or parts groups.

    Raises
    ------
    InputError
        If the cell graph does not fit the cells.
    PartitionError
        If neither the start nor what was made of it keeps the limits.

    Notes
    -----
    O(n) for bounded degrees, divided among the ranks; see `methods.smoothing.smooth`.
    """
    items = CellItems.of(problem)
    part = items.gather(start)
    sizes = problem.level_sizes or (problem.n_parts,)
    graph = items.graph
    if len(sizes) > 1:
        graph = graph.without_edges_between(graph.held(part // np.int32(sizes[-1])))
    better = smooth_slice(graph, part, capacities(graph, problem, problem.tolerance))
    if not limits_kept(problem, items, better):
        graph = replace(graph, vertex_weight=_both_weights(problem, items))
        better = smooth_slice(graph, part, capacities(graph, problem, 0.0))
        if not limits_kept(problem, items, better):
            if not limits_kept(problem, items, part):
                raise PartitionError(
                    "the limits are kept neither by the start nor by smoothing it; "
                    "wanted a start that keeps them, or larger limits"
                )
            return start
    return items.spread(better)


def capacities(graph: WeightedSlice, problem: Problem, tolerance: float) -> Int64Array:
    """Return the most each part may weigh: (1 + tolerance) shares, or whole shares rounded up."""
    total = int(graph.comm.allreduce(graph.vertex_weight.sum(keepdims=True))[0])
    speed: FloatArray = problem.part_speed
    share = total * (speed / speed.sum())
    whole = np.ceil(share - 1e-12 * share).astype(np.int64)
    if np.all(speed == speed[0]):
        whole[:] = -(-total // len(speed))
    return np.asarray(np.maximum(np.floor((1.0 + tolerance) * share).astype(np.int64), whole))


def limits_kept(problem: Problem, items: CellItems, part: Int32Array) -> bool:
    """Whether no part holds more of the limited weight than it may."""
    if items.limit_weight is None or problem.part_limit is None:
        return True
    held = items.graph.sum_by(part, items.limit_weight, problem.n_parts)
    return bool(np.all(held <= problem.part_limit))


def _both_weights(problem: Problem, items: CellItems) -> Int64Array:
    """Weigh each item by the larger of its two weights, relative to what a part may hold."""
    assert items.limit_weight is not None
    assert problem.part_limit is not None
    weight = items.graph.vertex_weight
    total = int(items.graph.comm.allreduce(weight.sum(keepdims=True))[0])
    fair = max(total / problem.n_parts, 1.0)
    work = weight / (fair * (1.0 + problem.tolerance))
    limited = items.limit_weight / max(1.0, float(problem.part_limit.mean()))
    return np.asarray(np.ceil(np.maximum(work, limited) * (1 << FINE)), np.int64)
