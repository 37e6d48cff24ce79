"""Move the cuts along a curve, within the allowed imbalance, to where they cut fewest faces.

B. W. Kernighan's sequential dynamic programme (J. ACM 18:34 (1971), from memory), restricted to
one window of positions around each plain cut: exact among all choices of one position from each
window that keep every chunk within its capacity. The plain cuts are among them, so the cut never
grows; and the pieces stay contiguous. Windows reach half-way to the neighbouring cuts at most.
Where they hold more pairs of positions than `BUDGET` allows, only every s-th position is tried
first and then all of them near the ones found: no longer exact, still never worse.

Cost: O(n) to find the rows inside the windows, O(width^2) a cut, bounded by `BUDGET` in all.

Measured (tools/bench/classics.py: 1.08e6 random Delaunay tets, 3 %, Hilbert): 0.961, 0.940, 0.888
and 0.930 of the plain cut for 4, 16, 64 and 1000 parts; 0.3 to 0.65 s of processor time beyond the
plain split and the cell graph. 64^3 lattice: 0.961, 1, 0.936 and 0.922 for 7, 64, 100 and 1000
parts (64 cubes are optimal as they are). The heaviest part then uses up the tolerance, and the cell
graph is needed, which takes several times as long as the plain split: hence a wish
(`cuts="least"`), not the default.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.curve import Curve, curve_order
from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array, IntArray
from sfcpart.errors import InputError
from sfcpart.kernels.curve.chunks import caps
from sfcpart.kernels.curve.window_cuts import cut_windows
from sfcpart.methods.problem import Problem
from sfcpart.methods.together import number_items
from sfcpart.weights import face_weights

__all__ = ["ItemLine", "least_cut_positions", "line_capacity", "with_least_cuts"]

BUDGET = 10**8
"""A quarter of the pairs of positions that are looked at: windows have to fit."""
SMALLEST = 64
"""Positions on either side that a window may always have."""
REACH = 4.0
"""Weight that a window covers on either side, in units of the excess that a chunk may have."""


@dataclass(frozen=True, eq=False)
class ItemLine:
    """Items in a line and the cells that they stand for.

    Attributes
    ----------
    item : (n_cells,) integers
        Place in the line of each cell's item; cells of one item are never parted.
    sums : (n_items + 1,) int64
        Weight before each position.
    limit_sums : (n_items + 1,) int64, or None
        The same for a second weight.
    """

    item: IntArray
    sums: Int64Array
    limit_sums: Int64Array | None = None

    @classmethod
    def of(
        cls,
        item: IntArray,
        weight: Int64Array | None = None,
        limit_weight: Int64Array | None = None,
    ) -> ItemLine:
        """Add up the weights of cells (1 each by default) along the line."""
        n = int(item.max(initial=-1)) + 1
        sums = [
            _sums_along(item, n, np.ones(len(item), np.int64) if weight is None else weight),
            None if limit_weight is None else _sums_along(item, n, limit_weight),
        ]
        assert sums[0] is not None
        return cls(item, sums[0], sums[1])

    def only(self, position: Int64Array) -> ItemLine:
        """Keep some positions (ascending, the ends among them): items between them become one."""
        block = np.zeros(len(self.sums), np.int64)
        block[position[1:]] = 1
        np.cumsum(block, out=block)
        second = None if self.limit_sums is None else self.limit_sums[position]
        return ItemLine(block[self.item], self.sums[position], second)


def with_least_cuts(problem: Problem, cell_part: Int32Array, *, curve: Curve) -> Int32Array:
    """Return chunks of a curve with their cuts moved to the least total cut.

    Parameters
    ----------
    problem : Problem
        Tolerance, speeds, groups and limits are kept; nested levels too, since each of their
        chunks is a row of parts, and none of these outgrows its share by more than the tolerance.
    cell_part : (n_local,) int32
        The plain chunks.
    curve : {"hilbert", "morton", "rows"}

    Returns
    -------
    (n_local,) int32
        Never cuts more faces than `cell_part`; no part is heavier than the tolerance allows, or
        than the bottleneck of the plain chunks if that is more. The same for any number of ranks
        and threads: every rank gathers the whole problem.

    Raises
    ------
    InputError
        If the cell graph has other cells than the problem.
    """
    part = _whole(problem, cell_part)
    graph = problem.graph()
    if graph.n_cells != len(part):
        raise InputError(f"the cell graph has {graph.n_cells} cells, the problem {len(part)}")
    order = curve_order(_whole(problem, problem.centers), curve=curve)
    item = np.empty(len(part), np.int64)
    item[order] = np.arange(len(part))
    if problem.group is not None:
        item[order] = number_items(_whole(problem, problem.group)[order])[0]
    line = ItemLine.of(
        item,
        None if problem.weight is None else _whole(problem, problem.weight),
        None if problem.limit_weight is None else _whole(problem, problem.limit_weight),
    )
    item_part = np.empty(len(line.sums) - 1, np.int32)
    item_part[item] = part
    cut = np.searchsorted(item_part, np.arange(problem.n_parts + 1)).astype(np.int64)
    if not np.all(np.diff(cut) > 0):  # fewer cells than parts
        return cell_part
    speed, tolerance = problem.part_speed, problem.tolerance
    cut = least_cut_positions(
        line,
        cut,
        indptr=graph.indptr,
        indices=graph.indices,
        capacity=line_capacity(line, cut, speed=speed, tolerance=tolerance),
        edge_weight=face_weights(graph.data, by=problem.face_weight),
        limit=problem.part_limit,
    )
    mine = slice(problem.first_gid, problem.first_gid + len(problem.centers))
    return np.searchsorted(cut[1:-1], item[mine], side="right").astype(np.int32)


def _whole(problem: Problem, values: Array) -> Array:
    """Join the ranks' slices."""
    return np.concatenate(problem.comm.allgather(values))


def line_capacity(
    line: ItemLine, cut: Int64Array, *, speed: FloatArray, tolerance: float
) -> Int64Array:
    """Return the most each chunk may weigh, (n_parts,) int64.

    (1 + tolerance) fair shares, or what the bottleneck of the given cuts allows if that is more.

    Parameters
    ----------
    line : ItemLine
    cut : (n_parts + 1,) int64
    speed : (n_parts,) float64
    tolerance : float
    """
    share = line.sums[-1] * (speed / speed.sum())
    bottleneck = float((np.diff(line.sums[cut]) / speed).max(initial=0.0))
    kept = caps(bottleneck, speed.astype(np.float64), int(line.sums[-1]))
    allowed: Int64Array = np.floor((1.0 + tolerance) * share).astype(np.int64)
    return np.asarray(np.maximum(allowed, kept), np.int64)


def least_cut_positions(
    line: ItemLine,
    cut: Int64Array,
    *,
    indptr: Int64Array,
    indices: IntArray,
    capacity: Int64Array,
    edge_weight: Int64Array | None = None,
    limit: Int64Array | None = None,
    reach: float = REACH,
) -> Int64Array:
    """Return cuts with the least total cut that windows around the given ones allow.

    Parameters
    ----------
    line : ItemLine
    cut : (n_parts + 1,) int64
        Strictly increasing, from 0 to the number of items.
    indptr, indices : (n_cells + 1,) int64, (n_entries,) integers
        The cell graph (symmetric).
    capacity : (n_parts,) int64
        The most each chunk may weigh; the given chunks must keep it.
    edge_weight : (n_entries,) int64, optional
        1 each by default.
    limit : (n_parts,) int64, optional
        The most limited weight of each chunk; the given chunks must keep it.
    reach : float
        Half-width of a window, in units of the excess weight its lighter chunk may have.

    Returns
    -------
    (n_parts + 1,) int64
        Strictly increasing. Among equal cuts, the positions nearest to the given ones, one after
        another from the right.

    Examples
    --------
    A path of six cells whose middle edge is heavy:

    >>> line = ItemLine.of(np.arange(6))
    >>> indptr, indices = np.array([0, 1, 3, 5, 7, 9, 10]), np.array([1, 0, 2, 1, 3, 2, 4, 3, 5, 4])
    >>> weight = np.array([2, 2, 2, 2, 9, 9, 1, 1, 2, 2])
    >>> least_cut_positions(
    ...     line, np.array([0, 3, 6]), indptr=indptr, indices=indices,
    ...     capacity=np.array([4, 4]), edge_weight=weight,
    ... ).tolist()
    [0, 4, 6]
    """
    if len(cut) < 3:
        return cut
    edges = _Edges(indptr, indices, edge_weight)
    widest = max(SMALLEST, int((BUDGET / len(cut)) ** 0.5))
    low, high = _windows(line, cut, capacity, reach, widest=len(line.sums))
    stride = -(-int(np.maximum(cut - low, high - cut).max()) // widest)
    if stride > 1:  # first among every stride-th position, then among all near those found
        tried = np.zeros(len(line.sums), np.bool_)
        tried[:-1:stride] = tried[cut] = True
        position = np.flatnonzero(tried)
        coarse = line.only(position)
        start = np.searchsorted(position, cut).astype(np.int64)
        low, high = _windows(coarse, start, capacity, reach, widest=widest)
        cut = position[_choose(coarse, start, (low, high), edges, capacity, limit)]
        widest = max(SMALLEST, 2 * stride)
    low, high = _windows(line, cut, capacity, reach, widest=widest)
    return _choose(line, cut, (low, high), edges, capacity, limit)


@dataclass(frozen=True, eq=False)
class _Edges:
    """The cell graph, perhaps weighted."""

    indptr: Int64Array
    indices: IntArray
    weight: Int64Array | None


def _choose(
    line: ItemLine,
    cut: Int64Array,
    windows: tuple[Int64Array, Int64Array],
    edges: _Edges,
    capacity: Int64Array,
    limit: Int64Array | None,
) -> Int64Array:
    """Choose the best position of each window."""
    low, high = windows
    width = high - low + 1
    first_row = np.concatenate(([0], np.cumsum(width)[:-1])).astype(np.int64)
    position = np.repeat(low - first_row, width) + np.arange(int(width.sum()))
    row_ptr, place, weight = _rows_at(line.item, position, edges)
    limit_sums = np.zeros(len(position), np.int64)
    if line.limit_sums is not None and limit is not None:
        limit_sums = line.limit_sums[position]
    else:
        limit = np.zeros(len(capacity), np.int64)
    chosen = np.empty(len(cut), np.int64)
    cut_windows(
        low, high, cut.astype(np.int64), first_row, row_ptr, place, weight, line.sums[position],
        capacity.astype(np.int64), limit_sums, limit.astype(np.int64),
        np.empty(len(position), np.int64), np.zeros(len(position), np.int32),
        np.empty(int(width.max()), np.int64), chosen,
    )  # fmt: skip
    return chosen


def _sums_along(item: IntArray, n: int, weight: Int64Array) -> Int64Array:
    """Return the weight before each position of the line."""
    sums = np.zeros(n + 1, np.int64)
    np.add.at(sums[1:], item, weight)
    np.cumsum(sums, out=sums)
    return sums


def _windows(
    line: ItemLine, cut: Int64Array, capacity: Int64Array, reach: float, *, widest: int
) -> tuple[Int64Array, Int64Array]:
    """Return the first and last position of each window, the two ends included.

    The excess is what a chunk may weigh beyond its part of all capacities.
    """
    sums, inner = line.sums, cut[1:-1]
    share = int(sums[-1]) * (capacity / max(1.0, float(capacity.sum())))
    excess = np.maximum(capacity - share, 0.0)
    slack = reach * np.minimum(excess[:-1], excess[1:])
    low = np.searchsorted(sums, sums[inner] - slack, "left")
    high = np.searchsorted(sums, sums[inner] + slack, "right") - 1
    half = (cut[:-1] + cut[1:]) // 2
    low = np.minimum(np.maximum.reduce([low, inner - widest, half[:-1] + 1]), inner)
    high = np.maximum(np.minimum.reduce([high, inner + widest, half[1:]]), inner)
    ends = [int(cut[0])], [int(cut[-1])]
    return (
        np.concatenate([ends[0], low, ends[1]]).astype(np.int64),
        np.concatenate([ends[0], high, ends[1]]).astype(np.int64),
    )


def _rows_at(
    item: IntArray, position: Int64Array, edges: _Edges
) -> tuple[Int64Array, Int64Array, Int64Array]:
    """Return the entries of the items at some positions (ascending), as CSR by position."""
    n_items = int(item.max()) + 1
    row_of = np.full(n_items + 1, -1, np.int64)
    row_of[position] = np.arange(len(position))
    cell = np.flatnonzero(row_of[item] >= 0)
    row = row_of[item[cell]]
    order = np.argsort(row, kind="stable")
    cell, row = cell[order], row[order]
    first = edges.indptr[cell]
    degree = (edges.indptr[cell + 1] - first).astype(np.int64)
    before = np.concatenate(([0], np.cumsum(degree)))
    entry = np.repeat(first - before[:-1], degree) + np.arange(int(before[-1]))
    # Cells of one position stand together: its entries end where its last cell's do.
    row_ptr = before[np.searchsorted(row, np.arange(len(position) + 1))]
    place = item[edges.indices[entry]].astype(np.int64)
    weight = np.ones(len(entry), np.int64) if edges.weight is None else edges.weight[entry]
    return row_ptr, place, weight
