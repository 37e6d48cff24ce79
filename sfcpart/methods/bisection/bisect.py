"""Recursive bisection: divide the items in two along a direction or an eigenvector, and again.

Coordinate: across the longest side of the box of the centres (M. J. Berger, S. H. Bokhari, IEEE
Trans. Comput. C-36:570 (1987)). Inertial: across the principal axis of the centres as masses
(H. D. Simon, Comput. Syst. Eng. 2:135 (1991)). Spectral: along the Fiedler vector of the cell
graph (A. Pothen, H. D. Simon, K.-P. Liou, SIAM J. Matrix Anal. Appl. 11:430 (1990)); see
`methods.bisection.fiedler`. Sources from memory.

Any number of parts: m parts become m // 2 and the rest, with weight in proportion to their speeds;
the cut is where the more loaded side is loaded least. Nested levels are bisected one after
another. Items (free cells, groups) are told apart by their value, then by the number of their
first cell (spectral: by their place on the Hilbert curve), so the answer is the same for any
number of threads. These methods do not share their work among ranks yet: every rank gathers the
whole problem and computes all of it, so the answer is the same for any number of ranks too.

Measured (tools/bench/classics.py: 1.08e6 random Delaunay tets, 64 parts, processor time; the
Hilbert curve cuts 89,381 faces in 0.1 s): coordinate 79,409 in 0.25 s, inertial 88,661 in 0.26 s
(with weights, which need sorting, 1.2 s both), spectral 76,558 in 17.6 s. 4096 parts: 0.6 s and
1.2 s. Where the eigenvalue is
multiple (cubes, squares) the Fiedler vector may lie askew: on a 24^3 lattice spectral bisection
cuts 886 faces for two parts, the others 576.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import Array, BoolArray, FloatArray, Int32Array, Int64Array
from sfcpart.errors import PartitionError
from sfcpart.methods.bisection.fiedler import spectral_line
from sfcpart.methods.curve.along_curve import unfit
from sfcpart.methods.graph.cell_problem import CellProblem
from sfcpart.methods.problem import Problem
from sfcpart.methods.together import number_items

__all__ = ["coordinate", "inertial", "spectral"]

Score = Callable[[Int64Array, float], Array]
"""Ascending items and the share of the first side -> the values they are cut by."""


def coordinate(problem: Problem) -> Int32Array:
    """Return the part of each local cell by recursive coordinate bisection.

    Parameters
    ----------
    problem : Problem

    Returns
    -------
    (n_local,) int32
        The same for any number of ranks and threads. A part is empty only if there are fewer
        cells than parts.

    Raises
    ------
    InputError
        If speeds or levels do not fit the parts.
    PartitionError
        If no cut on the way keeps the limits, or groups leave fewer items than parts.

    Notes
    -----
    O(n log P), with weights O(n log n log P). A group stands at the weighted mean of its centres.
    """
    return _by_place(problem, _longest_side)


def inertial(problem: Problem) -> Int32Array:
    """Return the part of each local cell by recursive inertial bisection.

    Parameters
    ----------
    problem : Problem

    Returns
    -------
    (n_local,) int32
        As `coordinate`.

    Raises
    ------
    InputError, PartitionError
        As `coordinate`.

    Notes
    -----
    As `coordinate`. Masses are the weights. An axis of coordinates that is principal to 1 in 10^9
    is taken as it is; other axes are rounded to multiples of 2^-20, so that cells in one plane
    across them tie and no rounding decides.
    """
    return _by_place(problem, _principal_axis)


def spectral(problem: Problem) -> Int32Array:
    """Return the part of each local cell by recursive spectral bisection of the cell graph.

    Parameters
    ----------
    problem : Problem

    Returns
    -------
    (n_local,) int32
        As `coordinate`.

    Raises
    ------
    InputError
        If the cell graph does not fit the cells, or speeds or levels the parts.
    PartitionError
        As `coordinate`.

    Notes
    -----
    Edges count faces. Components lie in a row; only the one that the cut falls into is cut along
    its Fiedler vector, which is known to the accuracy that `methods.bisection.fiedler` states.
    """
    problem.comm.check(unfit(problem))
    cells = CellProblem.of(problem)
    weight = None if problem.weight is None and problem.group is None else cells.graph.vertex_weight
    items = _Items(cells.graph.n, weight, cells.limit_weight)

    def score(members: Int64Array, share: float) -> Array:
        return spectral_line(cells.graph, members, share)

    return cells.spread(_bisect(problem, items, score))


@dataclass(frozen=True, eq=False)
class _Items:
    """What is divided: free cells and groups; a weight of None means 1 each."""

    n: int
    weight: Int64Array | None
    limit_weight: Int64Array | None


def _by_place(
    problem: Problem, score_of: Callable[[FloatArray, Int64Array | None], Score]
) -> Int32Array:
    """Divide by values of the centres; `score_of` takes (dim, n) centres and their weights."""
    problem.comm.check(unfit(problem))
    centers, weight, limit, group = (
        None if values is None else np.concatenate(problem.comm.allgather(values))
        for values in (problem.centers, problem.weight, problem.limit_weight, problem.group)
    )
    mine = slice(problem.first_gid, problem.first_gid + len(problem.centers))
    axes = np.ascontiguousarray(np.asarray(centers, np.float64).T)
    if group is None:
        items = _Items(axes.shape[1], weight, limit)
        return _bisect(problem, items, score_of(axes, weight))[mine]
    item, n = number_items(group)
    if n < problem.n_parts <= len(item):
        raise PartitionError(
            f"groups leave {n} items for {problem.n_parts} parts; "
            "ask for fewer parts or smaller groups"
        )
    whole = np.ones(len(item), np.int64) if weight is None else weight
    items = _Items(n, _added(item, n, whole), None if limit is None else _added(item, n, limit))
    places = _mean_places(axes, item, items, whole)
    return _bisect(problem, items, score_of(places, items.weight))[item][mine]


def _added(item: Int64Array, n: int, values: Int64Array) -> Int64Array:
    """Add up integers by item."""
    total = np.zeros(n, np.int64)
    np.add.at(total, item, values)
    return total


def _mean_places(
    axes: FloatArray, item: Int64Array, items: _Items, weight: Int64Array
) -> FloatArray:
    """Return the weighted mean centre of each item, (dim, n_items); plain means if all weigh 0."""
    assert items.weight is not None
    mass = np.where(items.weight[item] > 0, weight / np.maximum(items.weight, 1)[item], 1.0)
    whole = np.bincount(item, mass, minlength=items.n)
    first = np.full(items.n, -1, np.int64)
    first[item[::-1]] = np.arange(len(item))[::-1]
    # Relative to the first member, which keeps free cells exactly where they are.
    offset = [np.bincount(item, mass * (x - x[first][item]), minlength=items.n) for x in axes]
    return np.stack([x[first] + d / whole for x, d in zip(axes, offset, strict=True)])


def _bisect(problem: Problem, items: _Items, score: Score) -> Int32Array:
    """Divide all items among all parts, two by two."""
    _check_whole_limit(problem, items)
    part = np.zeros(items.n, np.int32)
    todo = [(np.arange(items.n), 0, problem.n_parts)]
    while todo:
        members, low, high = todo.pop()
        if high - low == 1 or not len(members):
            part[members] = low
            continue
        middle = _middle(low, high, problem.level_sizes or (problem.n_parts,))
        first = _first_side(problem, items, members, (low, middle, high), score)
        todo += [(members[~first], middle, high), (members[first], low, middle)]
    return part


def _check_whole_limit(problem: Problem, items: _Items) -> None:
    """Refuse more of the limited weight than all parts together may hold."""
    if problem.part_limit is None or items.limit_weight is None:
        return
    need, room = int(items.limit_weight.sum()), sum(map(int, problem.part_limit))
    if need > room:
        unit = problem.limit_unit
        raise PartitionError(
            f"the cells need {need * unit:.10g} in all, the {problem.n_parts} parts may hold "
            f"{room * unit:.10g}; raise the limit or ask for more parts"
        )


def _middle(low: int, high: int, sizes: tuple[int, ...]) -> int:
    """Return where to divide the parts low..high - 1: at a boundary of the outermost level."""
    inside = 1
    for size in sizes:
        inside *= size
    for size in sizes:
        inside //= size
        if high - low > inside:
            break
    return low + (high - low) // inside // 2 * inside


def _first_side(
    problem: Problem, items: _Items, members: Int64Array, bounds: tuple[int, int, int], score: Score
) -> BoolArray:
    """Mark the items that go to the parts low..middle - 1."""
    low, middle, high = bounds
    speed = np.array([problem.part_speed[low:middle].sum(), problem.part_speed[middle:high].sum()])
    n, m = len(members), np.array([middle - low, high - middle])
    fewest, most = (m[0], n - m[1]) if n >= m.sum() else (max(0, n - m[1]), min(m[0], n))
    share = float(speed[0] / speed.sum())
    value = score(members, share)
    weight = None if items.weight is None else items.weight[members]
    if weight is not None and not weight.any():
        weight = None
    limited = problem.part_limit is not None and items.limit_weight is not None
    if weight is None and not limited:
        count = _best_count(np.arange(n + 1), speed, int(fewest), int(most))
        return _lowest(value, count)
    order = np.argsort(value, kind="stable")
    if limited:
        fewest, most = _keep_limits(problem, items, members[order], bounds, int(fewest), int(most))
    sums = np.arange(n + 1) if weight is None else _sums(weight[order])
    first = np.zeros(n, np.bool_)
    first[order[: _best_count(sums, speed, int(fewest), int(most))]] = True
    return first


def _sums(values: Int64Array) -> Int64Array:
    """Return the sums before each position and of all."""
    return np.concatenate(([0], np.cumsum(values)))


def _best_count(sums: Int64Array, speed: FloatArray, fewest: int, most: int) -> int:
    """Return how many items the first side takes, so that the more loaded side is loaded least.

    Among counts of the same weight the one nearest to the share by number.
    """
    whole, n = sums[-1], len(sums) - 1
    share = speed[0] / speed.sum()
    above = int(np.searchsorted(sums, whole * share))
    counts = np.clip([above - 1, above], fewest, most)
    loads = np.maximum(sums[counts] / speed[0], (whole - sums[counts]) / speed[1])
    weight = sums[counts[int(np.argmin(loads))]]
    alike = np.searchsorted(sums, weight, "left"), np.searchsorted(sums, weight, "right") - 1
    return int(np.clip(round(n * share), max(fewest, alike[0]), min(most, alike[1])))


def _lowest(value: Array, count: int) -> BoolArray:
    """Mark the `count` lowest values, the first ones of those that tie."""
    if count in (0, len(value)):
        return np.full(len(value), count > 0)
    threshold = np.partition(value, count - 1)[count - 1]
    first: BoolArray = value < threshold
    tied = np.flatnonzero(value == threshold)
    first[tied[: count - int(first.sum())]] = True
    return first


def _keep_limits(
    problem: Problem,
    items: _Items,
    line: Int64Array,
    bounds: tuple[int, int, int],
    fewest: int,
    most: int,
) -> tuple[int, int]:
    """Narrow the counts of the first side to those that keep the summed limits of both sides."""
    assert problem.part_limit is not None
    assert items.limit_weight is not None
    low, middle, high = bounds
    sums = _sums(items.limit_weight[line])
    need = int(sums[-1])
    room = [
        min(need, sum(map(int, problem.part_limit[a:b])))
        for a, b in ((low, middle), (middle, high))
    ]
    least = max(fewest, int(np.searchsorted(sums, need - room[1], "left")))
    greatest = min(most, int(np.searchsorted(sums, room[0], "right")) - 1)
    if least <= greatest:
        return least, greatest
    unit = problem.limit_unit
    raise PartitionError(
        f"no cut between parts {low} to {middle - 1} (which may hold {room[0] * unit:.10g}) and "
        f"{middle} to {high - 1} ({room[1] * unit:.10g}) keeps the limits of a "
        f"{need * unit:.10g} to divide; raise the limit or split with method 'hilbert'"
    )


def _longest_side(axes: FloatArray, weight: Int64Array | None) -> Score:
    """Cut by the coordinate of the longest side of the box; the first, if several are."""

    def score(members: Int64Array, share: float) -> FloatArray:
        columns: list[FloatArray] = [x[members] for x in axes]
        extent = [float(x.max()) / 2 - float(x.min()) / 2 for x in columns]
        return columns[int(np.argmax(extent))]

    return score


def _principal_axis(axes: FloatArray, weight: Int64Array | None) -> Score:
    """Cut by the place along the principal axis of the masses."""

    def score(members: Int64Array, share: float) -> FloatArray:
        columns = [x[members] for x in axes]
        middle = [float(x.max()) / 2 + float(x.min()) / 2 for x in columns]
        size = max(float(np.abs(x - c).max()) for x, c in zip(columns, middle, strict=True))
        columns = [(x - c) / (size or 1.0) for x, c in zip(columns, middle, strict=True)]
        direction = _direction(columns, None if weight is None else weight[members])
        along = np.zeros(len(members))
        for x, d in zip(columns, direction, strict=True):
            along += x * d
        return along

    return score


def _direction(columns: list[FloatArray], weight: Int64Array | None) -> FloatArray:
    """Return the direction of greatest variance, a coordinate axis where one is as good.

    Sums are numpy's own, in one thread, for the same bits whatever the number of threads.
    """
    dim = len(columns)
    mass = None if weight is None or not weight.any() else weight / float(weight.max())
    whole = len(columns[0]) if mass is None else mass.sum()
    heavy = [x if mass is None else x * mass for x in columns]
    mean = [x.sum() / whole for x in heavy]
    inertia = np.empty((dim, dim))
    for i in range(dim):
        for j in range(i, dim):
            inertia[i, j] = inertia[j, i] = (heavy[i] * columns[j]).sum() / whole - mean[i] * mean[
                j
            ]
    variance, vectors = np.linalg.eigh(inertia)
    axis = int(np.argmax(np.diag(inertia) > np.diag(inertia).max() * (1 - 1e-9)))
    direction = np.zeros(dim)
    if inertia[axis, axis] >= variance[-1] * (1 - 1e-9):
        direction[axis] = 1.0
        return direction
    direction = np.round(vectors[:, -1] * 2.0**20) / 2.0**20
    return direction * (1.0 if direction[np.argmax(np.abs(direction))] > 0 else -1.0)
