"""Least cut between two parts within a band around their border, by maximum flow.

For each pair of parts a band of vertices on both sides of their border is taken; what lies
behind it on either side is source and sink. The least cut of that network is the best border
the band allows. Pairs that share no part can run on different threads.

Source: flow-based refinement of partitions, Sanders, Schulz, ESA 2011 (from memory).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.graph.cut_trees import (
    HEAD,
    N_COLUMNS,
    SINK,
    SOURCE,
    TREE,
    TWIN,
    push_flow,
)

__all__ = ["flow_pairs"]

PUSHES = 50
"""Pushes a vertex of a band after which a flow is given up."""


@jit
def collect_band(
    a: int,
    b: int,
    fringe: Array,
    indptr: Array,
    indices: Array,
    vertex_weight: Array,
    part: Array,
    limit: int,
    most: int,
    depth: int,
    local: Array,
    band: Array,
    n: int,
) -> tuple[int, int]:
    """Append to `band[n:]` the vertices of a within `depth` steps of b, up to weight `limit`.

    Returns the new length and the number of entries in the band's rows.
    """
    first = n
    weight = 0
    entries = 0
    for i in range(len(fringe)):
        v = fringe[i]
        if part[v] != a or n - first >= most or weight + vertex_weight[v] > limit:
            continue
        for j in range(indptr[v], indptr[v + 1]):
            if part[indices[j]] == b:
                weight += vertex_weight[v]
                local[v] = n
                band[n] = v
                n += 1
                entries += indptr[v + 1] - indptr[v]
                break
    layer_start = first
    for _ in range(depth):
        layer_stop = n
        for i in range(layer_start, layer_stop):
            v = band[i]
            for j in range(indptr[v], indptr[v + 1]):
                u = indices[j]
                if part[u] != a or local[u] >= 0 or n - first >= most:
                    continue
                if weight + vertex_weight[u] > limit:
                    continue
                weight += vertex_weight[u]
                local[u] = n
                band[n] = u
                n += 1
                entries += indptr[u + 1] - indptr[u]
        layer_start = layer_stop
    return n, entries


@jit
def build_network(
    n_a: int,
    n: int,
    band: Array,
    local: Array,
    a: int,
    b: int,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    part: Array,
    ptr: Array,
    stop: Array,
    arc: Array,
    left: Array,
    source: Array,
    sink: Array,
) -> int:
    """Write the band's arcs (each with its twin) and its links to what lies behind it.

    The first `n_a` vertices of the band are a's. Returns the weight of the present border.
    """
    room = 0
    for i in range(n):
        ptr[i] = room
        stop[i] = room
        room += indptr[band[i] + 1] - indptr[band[i]]
        source[i] = 0
        sink[i] = 0
    border = 0
    for i in range(n):
        v = band[i]
        for j in range(indptr[v], indptr[v + 1]):
            u = indices[j]
            h = local[u]
            if h < 0:
                if part[u] == a:
                    source[i] += edge_weight[j]
                    border += edge_weight[j] if i >= n_a else 0
                elif part[u] == b:
                    sink[i] += edge_weight[j]
                    border += edge_weight[j] if i < n_a else 0
            elif h > i and (part[u] == a or part[u] == b):
                x = stop[i]
                y = stop[h]
                stop[i] += 1
                stop[h] += 1
                arc[x, HEAD] = h
                arc[y, HEAD] = i
                arc[x, TWIN] = y
                arc[y, TWIN] = x
                left[x] = edge_weight[j]
                left[y] = edge_weight[j]
                border += edge_weight[j] if i < n_a and h >= n_a else 0
    return border


@jit
def settle(
    a: int,
    b: int,
    n_a: int,
    n: int,
    band: Array,
    node: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    capacity: Array,
    fall: int,
) -> int:
    """Move the border to a least cut that fits; return 0: none does, 1: it stays, 2: it moved.

    There are two: a keeps only what the source reaches, or all but what reaches the sink. The one
    that leaves the parts' rooms more alike is taken, unless nothing is gained by it.
    """
    total = load[a] + load[b]
    small = load[a]
    for x in range(n_a):
        small -= vertex_weight[band[x]]
    large = small
    for x in range(n):
        side = node[x, TREE]
        small += vertex_weight[band[x]] if side == SOURCE else 0
        large += vertex_weight[band[x]] if side != SINK else 0
    small_fits = small <= capacity[a] and total - small <= capacity[b]
    large_fits = large <= capacity[a] and total - large <= capacity[b]
    if not (small_fits or large_fits):
        return 0
    # balance as far as capacities tell: the room both parts keep
    lean = capacity[a] - capacity[b] + total
    small_skew = abs(lean - 2 * small)
    large_skew = abs(lean - 2 * large)
    use_large = large_fits and (not small_fits or large_skew < small_skew)
    skew = large_skew if use_large else small_skew
    if fall <= 0 and (fall < 0 or skew >= abs(lean - 2 * load[a])):
        return 1
    for x in range(n):
        side = node[x, TREE]
        part[band[x]] = a if side == SOURCE or (use_large and side != SINK) else b
    load[a] = large if use_large else small
    load[b] = total - load[a]
    return 2


@jit
def flow_pairs(
    start: int,
    stop: int,
    left_part: Array,
    right_part: Array,
    fringe_ptr: Array,
    fringe: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    capacity: Array,
    local: Array,
    most: int,
    depth: int,
    stretch: float,
    gains: Array,
) -> None:
    """Put the border of pairs `start:stop` where it cuts least; write the falls to `gains`.

    `fringe` lists the boundary vertices by part. A band holds at most `most` vertices a side,
    `depth` steps deep, and at most `stretch` times the weight that the other part has room for;
    a cut that overloads a part is refused and the band narrowed. -1 in `gains` means the labels
    moved at equal cut. `local` (n,) is -1 before and after.
    """
    slim = np.empty((3, 2 * most), np.int32)  # band, and scratch of the flow
    wide = np.empty((4, 2 * most), np.int64)  # where arcs start and stop, capacities outside
    node = np.empty((2 * most, N_COLUMNS), np.int32)
    arc = np.empty((0, 2), np.int32)
    left = np.empty(0, np.int64)
    band = slim[0]
    for i in range(start, stop):
        a = left_part[i]
        b = right_part[i]
        gains[i] = 0
        widen = stretch
        for _ in range(3):
            # at most half a part, so that something is left to be source or sink
            limit_a = min(load[a] // 2, int(widen * max(0, capacity[b] - load[b])) + 1)
            limit_b = min(load[b] // 2, int(widen * max(0, capacity[a] - load[a])) + 1)
            n_a, entries_a = collect_band(
                a, b, fringe[fringe_ptr[a] : fringe_ptr[a + 1]], indptr, indices, vertex_weight,
                part, limit_a, most, depth, local, band, 0,
            )  # fmt: skip
            n, entries_b = collect_band(
                b, a, fringe[fringe_ptr[b] : fringe_ptr[b + 1]], indptr, indices, vertex_weight,
                part, limit_b, most, depth, local, band, n_a,
            )  # fmt: skip
            if entries_a + entries_b > len(left):
                arc = np.empty(((entries_a + entries_b) * 3 // 2, 2), np.int32)
                left = np.empty(len(arc), np.int64)
            border = build_network(
                n_a, n, band, local, a, b, indptr, indices, edge_weight, part, wide[0], wide[1],
                arc, left, wide[2], wide[3],
            )  # fmt: skip
            for x in range(n):
                local[band[x]] = -1
            value = push_flow(
                n, wide[0], wide[1], arc, left, wide[2], wide[3], node, slim[1], slim[2],
                PUSHES * n,
            )  # fmt: skip
            fall = border - value
            if value < 0:
                break
            how = settle(a, b, n_a, n, band, node, vertex_weight, part, load, capacity, fall)
            if how == 2:
                gains[i] = fall if fall > 0 else -1
            if how > 0 or fall <= 0:
                break
            widen *= 0.4
