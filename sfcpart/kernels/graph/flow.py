"""Least cut between two parts within a band around their border, by maximum flow.

For each pair of parts a band of vertices on both sides of their border is taken; what lies
behind it on either side is source and sink. The least cut of that network is the best border
the band allows. Pairs that share no part can run on different threads.

Sources: maximum flow by shortest augmenting paths, Dinic 1970; flow-based refinement of
partitions, Sanders, Schulz, ESA 2011 (both from memory).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["flow_pairs"]


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

    Returns the new length and the weight of the edges (entries) of the band's rows.
    """
    first = n
    weight = 0
    entries = 0
    for i in range(len(fringe)):
        v = fringe[i]
        if part[v] != a or n - first >= most:
            continue
        for j in range(indptr[v], indptr[v + 1]):
            if part[indices[j]] == b:
                if weight + vertex_weight[v] <= limit:
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
    arc_to: Array,
    twin: Array,
    left: Array,
    source: Array,
    sink: Array,
    fill: Array,
) -> int:
    """Write the band's arcs (each with its twin) and its links to what lies behind it.

    Returns the weight of the present border inside the band.
    """
    ptr[0] = 0
    for i in range(n):
        v = band[i]
        count = 0
        source[i] = 0
        sink[i] = 0
        for j in range(indptr[v], indptr[v + 1]):
            u = indices[j]
            p = part[u]
            if p != a and p != b:
                continue
            if local[u] >= 0:
                count += 1
            elif p == a:
                source[i] += edge_weight[j]
            else:
                sink[i] += edge_weight[j]
        ptr[i + 1] = ptr[i] + count
        fill[i] = ptr[i]
    border = 0
    for i in range(n):
        v = band[i]
        for j in range(indptr[v], indptr[v + 1]):
            p = part[indices[j]]
            if p != a and p != b:
                continue
            h = local[indices[j]]
            if h >= 0 and h <= i:
                continue
            if p != part[v]:
                border += edge_weight[j]
            if h < 0:
                continue
            x = fill[i]
            y = fill[h]
            fill[i] += 1
            fill[h] += 1
            arc_to[x] = h
            arc_to[y] = i
            twin[x] = y
            twin[y] = x
            left[x] = edge_weight[j]
            left[y] = edge_weight[j]
    return border


@jit
def push_flow(
    n: int,
    ptr: Array,
    arc_to: Array,
    twin: Array,
    left: Array,
    source: Array,
    sink: Array,
    level: Array,
    queue: Array,
    arc: Array,
    path: Array,
) -> int:
    """Push a maximum flow; return its value. Afterwards level >= 0 marks the source's side."""
    value = 0
    while True:
        last = 0
        for v in range(n):
            level[v] = -1
            arc[v] = ptr[v]
            if source[v] > 0:
                level[v] = 0
                queue[last] = v
                last += 1
        n_roots = last
        end_level = n + 1
        i = 0
        while i < last:
            v = queue[i]
            i += 1
            if level[v] >= end_level:
                break
            if sink[v] > 0:
                end_level = level[v]
                continue
            for x in range(ptr[v], ptr[v + 1]):
                u = arc_to[x]
                if level[u] < 0 and left[x] > 0:
                    level[u] = level[v] + 1
                    queue[last] = u
                    last += 1
        if end_level > n:
            return value
        for r in range(n_roots):
            root = queue[r]
            while source[root] > 0:
                v = root
                depth = 0
                while sink[v] == 0:  # walk down the levels, depth first
                    while arc[v] < ptr[v + 1] and not (
                        left[arc[v]] > 0 and level[arc_to[arc[v]]] == level[v] + 1
                    ):
                        arc[v] += 1
                    if arc[v] < ptr[v + 1] and level[v] < end_level:
                        path[depth] = arc[v]
                        depth += 1
                        v = arc_to[arc[v]]
                    elif depth == 0:
                        break
                    else:
                        depth -= 1
                        v = arc_to[twin[path[depth]]]
                        arc[v] += 1
                if sink[v] == 0:
                    break
                amount = min(source[root], sink[v])
                for y in range(depth):
                    amount = min(amount, left[path[y]])
                for y in range(depth):
                    left[path[y]] -= amount
                    left[twin[path[y]]] += amount
                source[root] -= amount
                sink[v] -= amount
                value += amount


@jit
def mark_sink_side(
    n: int,
    ptr: Array,
    arc_to: Array,
    twin: Array,
    left: Array,
    sink: Array,
    level: Array,
    queue: Array,
) -> None:
    """Set level to -2 for vertices that still reach the sink."""
    last = 0
    for v in range(n):
        if sink[v] > 0:
            level[v] = -2
            queue[last] = v
            last += 1
    i = 0
    while i < last:
        v = queue[i]
        i += 1
        for x in range(ptr[v], ptr[v + 1]):
            u = arc_to[x]
            if level[u] == -1 and left[twin[x]] > 0:
                level[u] = -2
                queue[last] = u
                last += 1


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
    band = np.empty(2 * most, np.int32)
    level = np.empty(2 * most, np.int32)
    queue = np.empty(2 * most, np.int32)
    path = np.empty(2 * most, np.int64)
    arc = np.empty(2 * most, np.int64)
    fill = np.empty(2 * most, np.int64)
    ptr = np.empty(2 * most + 1, np.int64)
    source = np.empty(2 * most, np.int64)
    sink = np.empty(2 * most, np.int64)
    arc_to = np.empty(0, np.int32)
    twin = np.empty(0, np.int64)
    left = np.empty(0, np.int64)
    for i in range(start, stop):
        a = left_part[i]
        b = right_part[i]
        gains[i] = 0
        widen = stretch
        total = load[a] + load[b]
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
            if entries_a + entries_b > len(arc_to):
                room = (entries_a + entries_b) * 3 // 2
                arc_to = np.empty(room, np.int32)
                twin = np.empty(room, np.int64)
                left = np.empty(room, np.int64)
            border = build_network(
                n, band, local, a, b, indptr, indices, edge_weight, part, ptr, arc_to, twin,
                left, source, sink, fill,
            )  # fmt: skip
            value = push_flow(n, ptr, arc_to, twin, left, source, sink, level, queue, arc, path)
            mark_sink_side(n, ptr, arc_to, twin, left, sink, level, queue)
            small = load[a]  # load of a if it keeps only the source's side; or all but the sink's
            for x in range(n_a):
                small -= vertex_weight[band[x]]
            large = small
            for x in range(n):
                if level[x] >= 0:
                    small += vertex_weight[band[x]]
                if level[x] != -2:
                    large += vertex_weight[band[x]]
                local[band[x]] = -1
            small_fits = small <= capacity[a] and total - small <= capacity[b]
            large_fits = large <= capacity[a] and total - large <= capacity[b]
            # balance as far as capacities tell: the room both parts keep
            small_skew = abs((capacity[a] - small) - (capacity[b] - total + small))
            large_skew = abs((capacity[a] - large) - (capacity[b] - total + large))
            if small_fits or large_fits:
                use_large = large_fits and (not small_fits or large_skew < small_skew)
                skew = large_skew if use_large else small_skew
                now = abs((capacity[a] - load[a]) - (capacity[b] - load[b]))
                if value < border or (value == border and skew < now):
                    for x in range(n):
                        to_a = level[x] >= 0 or (use_large and level[x] == -1)
                        part[band[x]] = a if to_a else b
                    load[a] = large if use_large else small
                    load[b] = total - load[a]
                    gains[i] = border - value if value < border else -1
                break
            if value >= border:
                break
            widen *= 0.4
