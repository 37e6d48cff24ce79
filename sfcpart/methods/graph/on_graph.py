"""The graph methods as ways to split a mesh: speeds, groups, limits and nested levels included.

Edges count faces, or weigh their quantised measures (`face_weight`). Groups are contracted to
single vertices first. A limit on a second weight is first left alone; if the parts break it, the
larger of both weights (each relative to its capacity) is balanced instead; if that fails too, the
split along the Hilbert curve is given, which keeps the limits or says that they cannot be kept.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array
from sfcpart.errors import PartitionError
from sfcpart.methods.bisection.bisect import coordinate
from sfcpart.methods.curve.along_curve import along_hilbert
from sfcpart.methods.graph.cell_problem import CellProblem, limits_kept
from sfcpart.methods.graph.coarsen import WeightedGraph
from sfcpart.methods.graph.labels import cut_of
from sfcpart.methods.graph.search import best_of_many
from sfcpart.methods.graph.vcycle import Aim, improve, rank_of
from sfcpart.methods.problem import Problem
from sfcpart.methods.smoothing.on_slices import smoothed

__all__ = ["multilevel"]

PROMISING = 1.1
"""A plain split that cuts at most this much more than a multilevel one is improved as well."""


def multilevel(problem: Problem) -> Int32Array:
    """Return the part of each local cell by multilevel partition of the cell graph.

    Parameters
    ----------
    problem : Problem

    Returns
    -------
    (n_local,) int32
        On a connected mesh every part is in one piece, unless balance or groups forbid it. Never
        cuts more than the `hilbert` method. The same for any number of ranks and threads; every
        rank computes all of it.

    Raises
    ------
    InputError
        If the cell graph does not fit the cells.
    PartitionError
        If limits cannot be kept, or groups leave fewer items than parts.

    Notes
    -----
    O(n) for bounded degrees; see `methods.graph.multilevel`.
    """
    cells = CellProblem.of(problem)
    sizes = problem.level_sizes or (problem.n_parts,)

    def solve(graph: WeightedGraph, tolerance: float) -> Int32Array:
        return _nested(graph, problem.part_speed, sizes, problem.seed, tolerance)

    part = solve(cells.graph, problem.tolerance)
    if not limits_kept(problem, cells, part):
        part = solve(_both_weights(problem, cells), 0.0)
        if not limits_kept(problem, cells, part):
            return along_hilbert(problem)
    start = _gathered(problem, cells, along_hilbert)
    if len(sizes) == 1 and problem.limit_weight is None:
        for other in (start, _gathered(problem, cells, coordinate)):
            part = _better(problem, cells.graph, part, other)
    if cut_of(cells.graph, start) < cut_of(cells.graph, part):
        return smoothed(problem)
    return cells.spread(part)


def _gathered(
    problem: Problem, cells: CellProblem, method: Callable[[Problem], Int32Array]
) -> Int32Array:
    """Return the part of each item by another method."""
    return cells.gather(np.concatenate(problem.comm.allgather(method(problem))))


def _better(
    problem: Problem, graph: WeightedGraph, part: Int32Array, other: Int32Array
) -> Int32Array:
    """Improve another partition if it is promising; return the better of the two.

    Cubes of a full grid and slabs across wall layers, for instance, are hard to find by merging.
    """
    if cut_of(graph, other) > PROMISING * cut_of(graph, part):
        return part
    total = int(graph.vertex_weight.sum())
    aim = mesh_aim(total, problem.part_speed, problem.tolerance, problem.seed)
    better = improve(graph, other, aim)
    return min(part, better, key=lambda found: rank_of(graph, found, aim))


def mesh_aim(total: int, speed: FloatArray, tolerance: float, seed: int) -> Aim:
    """Aim at shares by speed; capacities are (1 + tolerance) shares, or whole shares rounded up."""
    exact = Aim.of(total, speed, 0.0, seed)
    most = np.floor((1.0 + tolerance) * exact.share).astype(np.int64)
    return replace(exact, capacity=np.maximum(most, exact.capacity))


def _nested(
    graph: WeightedGraph, speed: FloatArray, sizes: tuple[int, ...], seed: int, tolerance: float
) -> Int32Array:
    """Divide level by level: each part of a level on its own."""
    inside = len(speed) // sizes[0]
    summed = speed.reshape(sizes[0], inside).sum(axis=1)
    total = int(graph.vertex_weight.sum())
    outer = best_of_many(graph, mesh_aim(total, summed, tolerance, seed))
    if len(sizes) == 1:
        return outer
    part = np.empty(graph.n, np.int32)
    for p in range(sizes[0]):
        members = np.flatnonzero(outer == p)
        own = speed[p * inside : (p + 1) * inside]
        fine = _nested(_inside(graph, members), own, sizes[1:], seed, tolerance)
        part[members] = p * inside + fine
    return part


def _inside(graph: WeightedGraph, members: Array) -> WeightedGraph:
    """Return the graph of some vertices and the edges between them."""
    place = np.full(graph.n, -1, np.int32)
    place[members] = np.arange(len(members), dtype=np.int32)
    degree = np.diff(graph.indptr)[members]
    row = np.repeat(np.arange(len(members)), degree)
    first = np.repeat(graph.indptr[members] - np.cumsum(degree) + degree, degree)
    entry = first + np.arange(len(row))
    keep = place[graph.indices[entry]] >= 0
    count = np.bincount(row[keep], minlength=len(members))
    return WeightedGraph(
        np.concatenate([[0], np.cumsum(count)]).astype(np.int64),
        place[graph.indices[entry[keep]]],
        graph.edge_weight[entry[keep]],
        graph.vertex_weight[members],
    )


def _both_weights(problem: Problem, cells: CellProblem) -> WeightedGraph:
    """Weigh each item by the larger of its two weights, relative to what a part may hold."""
    if cells.limit_weight is None or problem.part_limit is None:
        raise PartitionError("there is no limit to keep")
    graph = cells.graph
    fair: Int64Array = np.maximum(graph.vertex_weight.sum() / problem.n_parts, 1)
    work = graph.vertex_weight / (fair * (1.0 + problem.tolerance))
    limited = cells.limit_weight / max(1.0, float(problem.part_limit.mean()))
    weight = np.ceil(np.maximum(work, limited) * (1 << 20)).astype(np.int64)
    return WeightedGraph(graph.indptr, graph.indices, graph.edge_weight, weight)
