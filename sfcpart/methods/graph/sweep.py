"""Recursive bisection by sorting: every block is cut across the direction that cuts least.

A direction is a number a vertex: a coordinate, an inertial axis, a Fiedler vector, or, where there
are no coordinates, a difference of distances to two far vertices. Vertices of a block are sorted by
it and cut where the weight of the left parts is reached.

Source: recursive coordinate, inertial and spectral bisection (Simon 1991; Pothen, Simon, Liou
1990); distances to pivots as coordinates (Harel, Koren 2002), all from memory.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array
from sfcpart.methods.graph.coarsen import WeightedGraph

__all__ = ["Directions", "bisect_along", "cut_by_weight", "far_differences", "least_cut"]

Directions = Callable[[Int64Array], Array]
"""Vertices of a block -> (len, m) values, one column a direction."""


def bisect_along(
    weight: Int64Array, share: FloatArray, order_of: Callable[[Int64Array, float], Int64Array]
) -> Int32Array:
    """Return the parts of recursive bisection, (n,) int32.

    Parameters
    ----------
    weight : (n,) int64
    share : (n_parts,) float64
        Wanted weight of each part; a block is cut in the ratio of its halves' shares.
    order_of : callable
        Ascending vertices of a block and the fraction wanted on the left -> the same vertices in
        the order along which to cut.
    """
    part = np.zeros(len(weight), np.int32)
    blocks = [(0, len(share), np.arange(len(weight)))]
    while blocks:
        low, high, members = blocks.pop()
        if high - low == 1 or len(members) == 0:
            part[members] = low
            continue
        mid = low + _left_parts(high - low)
        whole = float(share[low:high].sum())
        equal = (mid - low) / (high - low)
        fraction = float(share[low:mid].sum()) / whole if whole > 0 else equal
        order = order_of(members, fraction)
        at = cut_by_weight(weight[order], fraction, n_left=mid - low, n_right=high - mid)
        blocks.append((mid, high, np.sort(order[at:])))
        blocks.append((low, mid, np.sort(order[:at])))
    return part


def _left_parts(n_parts: int) -> int:
    """Return how many parts go left: nearly half, but whole thirds or fifths where there are."""
    for divisor in (2, 3, 5):
        if n_parts % divisor == 0:
            return n_parts // divisor * ((divisor + 1) // 2)
    return (n_parts + 1) // 2


def cut_by_weight(weight: Int64Array, fraction: float, *, n_left: int, n_right: int) -> int:
    """Return where a sorted block is cut: nearest to the fraction, with a vertex for each part."""
    n = len(weight)
    total = np.cumsum(weight)
    goal = fraction * float(total[-1])
    if total[-1] == 0:
        at = round(fraction * n)
    else:
        at = int(np.searchsorted(total, goal - 1e-9 * goal))
        below = float(total[at - 1]) if at > 0 else 0.0
        at += int(at < n and total[at] - goal <= goal - below)
    if n < n_left + n_right:
        return min(n_left, n)
    return min(max(at, n_left), n - n_right)


def least_cut(
    graph: WeightedGraph, values: Directions
) -> Callable[[Int64Array, float], Int64Array]:
    """Order blocks along the one of several directions that cuts the least edge weight."""
    place = np.full(graph.n, -1, np.int64)

    def order_of(members: Int64Array, fraction: float) -> Int64Array:
        place[members] = np.arange(len(members))
        degree = np.diff(graph.indptr)[members]
        row = np.repeat(np.arange(len(members)), degree)
        first = np.repeat(graph.indptr[members] - np.cumsum(degree) + degree, degree)
        entry = first + np.arange(len(row))
        neighbour = place[graph.indices[entry]]
        keep = neighbour > row
        row, neighbour, width = row[keep], neighbour[keep], graph.edge_weight[entry[keep]]
        place[members] = -1
        table = values(members)
        best, best_cut = np.arange(len(members)), -1
        rank = np.empty(len(members), np.int64)
        for column in range(table.shape[1]):
            order = np.lexsort((table[:, column - 1], table[:, column]))
            at = cut_by_weight(graph.vertex_weight[members[order]], fraction, n_left=1, n_right=1)
            rank[order] = np.arange(len(members))
            cut = int(width[(rank[row] < at) != (rank[neighbour] < at)].sum())
            if best_cut < 0 or cut < best_cut:
                best, best_cut = order, cut
        return members[best]

    return order_of


def far_differences(graph: WeightedGraph, *, n_far: int, seed: int) -> Array:
    """Return differences of distances to far vertices, (n, pairs) int32.

    Far vertices are those farthest from hashed ones: corners, on a grid.
    """
    far: list[int] = []
    distances: list[Array] = []
    rng = np.random.default_rng((seed, graph.n))
    for start in rng.integers(0, graph.n, 3 * n_far):
        v = int(np.argmax(_distances(graph, int(start))))
        if v not in far:
            far.append(v)
            distances.append(_distances(graph, v))
        if len(far) == n_far:
            break
    pairs = [(i, j) for i in range(len(far)) for j in range(i)]
    if not pairs:
        return np.stack(distances, axis=1)
    return np.stack([distances[i] - distances[j] for i, j in pairs], axis=1)


def _distances(graph: WeightedGraph, start: int) -> Array:
    """Steps from a vertex to all; to those it does not reach, more than to any other."""
    distance = np.full(graph.n, -1, np.int32)
    distance[start] = 0
    front = np.array([start], np.int32)
    step = 0
    while len(front):
        step += 1
        degree = graph.indptr[front + 1] - graph.indptr[front]
        first = np.repeat(graph.indptr[front] - np.cumsum(degree) + degree, degree)
        near = graph.indices[first + np.arange(len(first))]
        front = np.unique(near[distance[near] < 0])
        distance[front] = step
    distance[distance < 0] = step
    return distance
