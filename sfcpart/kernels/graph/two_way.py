"""Two-way work on one pair of parts: growing a first half, and boundary refinement.

Pairs that share no part can run on different threads: a pair reads and writes only the labels
a and b of its own vertices.

Sources: greedy graph growing; refinement with rollback, Kernighan, Lin 1970; Fiduccia,
Mattheyses 1982 (all from memory).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.graph.heap import drop, put

__all__ = ["bisect_blocks", "colour_pairs", "refine_pairs"]

LOCKED = -2


@jit
def colour_pairs(pairs: Array, used: Array, colour: Array) -> None:
    """Give each pair of parts, in order, the first colour that neither part has (`used`) yet."""
    for i in range(len(pairs)):
        a = pairs[i, 0]
        b = pairs[i, 1]
        c = 0
        while used[a, c] or used[b, c]:
            c += 1
        used[a, c] = True
        used[b, c] = True
        colour[i] = c


@jit
def pair_gain(
    v: int, other: int, indptr: Array, indices: Array, edge_weight: Array, part: Array
) -> tuple[int, bool]:
    """Return what moving v to part `other` gains, and whether v touches that part."""
    own = part[v]
    gain = 0
    touches = False
    for j in range(indptr[v], indptr[v + 1]):
        p = part[indices[j]]
        if p == other:
            gain += edge_weight[j]
            touches = True
        elif p == own:
            gain -= edge_weight[j]
    return gain, touches


@jit
def refine_once(
    a: int,
    b: int,
    members: Array,
    n_members: int,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    capacity: Array,
    slack: int,
    key: Array,
    spot: Array,
    heap_a: Array,
    heap_b: Array,
    log: Array,
    patience: int,
) -> tuple[int, int]:
    """One pass over the boundary of a and b; return the falls of (overload, cut), never worse.

    Moves the best vertex of the overloaded part, else of either; a part may exceed its capacity
    by `slack` on the way. Ends after `patience` moves without a better state and goes back.
    """
    size_a = 0
    size_b = 0
    for i in range(n_members):
        v = members[i]
        other = b if part[v] == a else a
        gain, touches = pair_gain(v, other, indptr, indices, edge_weight, part)
        if touches:
            if other == b:
                size_a = put(heap_a, spot, key, v, gain, size_a)
            else:
                size_b = put(heap_b, spot, key, v, gain, size_b)
    over = max(0, load[a] - capacity[a]) + max(0, load[b] - capacity[b])
    start_over = over
    best_over = over
    now = 0
    best = 0
    best_skew = abs((load[a] - capacity[a]) - (load[b] - capacity[b]))
    n_moves = 0
    best_moves = 0
    while n_moves - best_moves < patience:
        if size_a == 0 and size_b == 0:
            break
        from_a = size_a > 0
        if load[a] > capacity[a]:
            if size_a == 0:
                break
        elif load[b] > capacity[b]:
            if size_b == 0:
                break
            from_a = False
        elif size_a > 0 and size_b > 0:
            key_a = key[heap_a[0]]
            key_b = key[heap_b[0]]
            if key_a == key_b:
                from_a = load[a] - capacity[a] >= load[b] - capacity[b]
            else:
                from_a = key_a > key_b
        v = heap_a[0] if from_a else heap_b[0]
        own = a if from_a else b
        to = b if from_a else a
        weight = vertex_weight[v]
        if from_a:
            size_a = drop(heap_a, spot, key, v, size_a)
        else:
            size_b = drop(heap_b, spot, key, v, size_b)
        room = capacity[to] + slack - load[to] - weight
        if room < 0 and not (
            load[own] > capacity[own]
            and load[to] + weight - capacity[to] < load[own] - capacity[own]
        ):
            continue
        spot[v] = LOCKED
        log[n_moves] = v
        n_moves += 1
        part[v] = to
        load[own] -= weight
        load[to] += weight
        now += key[v]
        over = max(0, load[a] - capacity[a]) + max(0, load[b] - capacity[b])
        skew = abs((load[a] - capacity[a]) - (load[b] - capacity[b]))
        if over < best_over or (
            over == best_over and (now > best or (now == best and skew < best_skew))
        ):
            best_over = over
            best = now
            best_skew = skew
            best_moves = n_moves
        for j in range(indptr[v], indptr[v + 1]):
            u = indices[j]
            p = part[u]
            if (p != a and p != b) or spot[u] == LOCKED:
                continue
            if spot[u] < 0:
                gain, touches = pair_gain(u, a + b - p, indptr, indices, edge_weight, part)
            else:
                gain = key[u] + (2 * edge_weight[j] if p == own else -2 * edge_weight[j])
            if p == a:
                size_a = put(heap_a, spot, key, u, gain, size_a)
            else:
                size_b = put(heap_b, spot, key, u, gain, size_b)
    for i in range(n_moves):
        spot[log[i]] = -1
    while n_moves > best_moves:
        n_moves -= 1
        v = log[n_moves]
        own = part[v]
        to = a + b - own
        part[v] = to
        load[own] -= vertex_weight[v]
        load[to] += vertex_weight[v]
    for i in range(size_a):
        spot[heap_a[i]] = -1
    for i in range(size_b):
        spot[heap_b[i]] = -1
    return start_over - best_over, best


@jit
def grow(
    a: int,
    b: int,
    first: int,
    goal: int,
    members: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    key: Array,
    spot: Array,
    heap: Array,
) -> None:
    """Move vertices from b to a, best connected first from members[first] on, up to `goal`."""
    m = len(members)
    size = 0
    at = first
    seen = 0
    while load[a] < goal and (size > 0 or seen < m):
        if size == 0:  # start, or the next component
            v = members[at % m]
            at += 1
            seen += 1
            if part[v] == a or spot[v] != -1:
                continue
        else:
            v = heap[0]
            size = drop(heap, spot, key, v, size)
        weight = vertex_weight[v]
        if load[a] + weight - goal > goal - load[a]:  # overshoots more than it misses
            spot[v] = LOCKED
            continue
        part[v] = a
        load[a] += weight
        load[b] -= weight
        for j in range(indptr[v], indptr[v + 1]):
            u = indices[j]
            if part[u] != b or spot[u] == LOCKED:
                continue
            if spot[u] < 0:
                gain, _ = pair_gain(u, a, indptr, indices, edge_weight, part)
            else:
                gain = key[u] + 2 * edge_weight[j]
            size = put(heap, spot, key, u, gain, size)
    for i in range(m):
        spot[members[i]] = -1


@jit
def far_member(
    first: int,
    b: int,
    members: Array,
    indptr: Array,
    indices: Array,
    part: Array,
    spot: Array,
    queue: Array,
) -> int:
    """Return the place in the queue order's last vertex of a breadth-first walk, as a member."""
    queue[0] = members[first]
    spot[queue[0]] = 0
    last = 1
    i = 0
    while i < last:
        v = queue[i]
        i += 1
        for j in range(indptr[v], indptr[v + 1]):
            u = indices[j]
            if part[u] == b and spot[u] == -1:
                spot[u] = 0
                queue[last] = u
                last += 1
    for i in range(last):
        spot[queue[i]] = -1
    far = queue[last - 1]
    for i in range(len(members)):
        if members[i] == far:
            return i
    return first


@jit
def bisect_blocks(
    start: int,
    stop: int,
    left: Array,
    right: Array,
    goal: Array,
    member_ptr: Array,
    members_all: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    capacity: Array,
    key: Array,
    spot: Array,
    tries: int,
    passes: int,
    seed: int,
) -> None:
    """Split blocks `start:stop`: block i (all its vertices labelled left[i]) into left and right.

    `goal[i]` is the weight wanted on the left. The best of `tries` growings, each refined, is
    kept: least overload, then least cut, then the earliest.
    """
    largest = 0
    for i in range(start, stop):
        largest = max(largest, member_ptr[i + 1] - member_ptr[i])
    heap_a = np.empty(largest, np.int32)
    heap_b = np.empty(largest, np.int32)
    log = np.empty(largest, np.int32)
    kept = np.empty(largest, np.int32)
    for i in range(start, stop):
        a = left[i]
        b = right[i]
        members = members_all[member_ptr[i] : member_ptr[i + 1]]
        m = len(members)
        total = 0
        for x in range(m):
            total += vertex_weight[members[x]]
        best_over = -1
        best_cut = -1
        mixed = (int(a) * 7919 + int(b) * 104729 + seed * 15485863) & 0x7FFFFFFF
        for turn in range(tries):
            if m == 0:
                break
            for x in range(m):
                part[members[x]] = b
            load[a] = 0
            load[b] = total
            mixed = ((mixed ^ (mixed >> 15)) * 0x2C1B3C6D + 12345) & 0x7FFFFFFF
            first = (mixed >> 3) % m
            if turn % 2 == 0:
                first = far_member(first, b, members, indptr, indices, part, spot, log)
            grow(
                a, b, first, goal[i], members, indptr, indices, edge_weight, vertex_weight,
                part, load, key, spot, heap_a,
            )  # fmt: skip
            for _ in range(passes):
                fall_over, fall = refine_once(
                    a, b, members, m, indptr, indices, edge_weight, vertex_weight, part, load,
                    capacity, 0, key, spot, heap_a, heap_b, log, 50 + m // 8,
                )  # fmt: skip
                if fall_over == 0 and fall == 0:
                    break
            over = max(0, load[a] - capacity[a]) + max(0, load[b] - capacity[b])
            cut = 0
            for x in range(m):
                v = members[x]
                if part[v] == a:
                    for j in range(indptr[v], indptr[v + 1]):
                        if part[indices[j]] == b:
                            cut += edge_weight[j]
            if best_cut < 0 or over < best_over or (over == best_over and cut < best_cut):
                best_over = over
                best_cut = cut
                for x in range(m):
                    kept[x] = part[members[x]]
        load[a] = 0
        load[b] = 0
        for x in range(m):
            v = members[x]
            part[v] = kept[x]
            load[kept[x]] += vertex_weight[v]


@jit
def refine_pairs(
    start: int,
    stop: int,
    left: Array,
    right: Array,
    fringe_ptr: Array,
    fringe: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    capacity: Array,
    slack: int,
    key: Array,
    spot: Array,
    patience: int,
    gains: Array,
) -> None:
    """Refine pairs `start:stop` (no part in two pairs); write the falls of the cut to `gains`.

    `fringe` lists the boundary vertices by part.
    """
    heap_a = np.empty(len(part), np.int32)
    heap_b = np.empty(len(part), np.int32)
    log = np.empty(len(part), np.int32)
    for i in range(start, stop):
        a = left[i]
        b = right[i]
        members = np.empty(
            fringe_ptr[a + 1] - fringe_ptr[a] + fringe_ptr[b + 1] - fringe_ptr[b], np.int32
        )
        m = 0
        for p in (a, b):
            for x in range(fringe_ptr[p], fringe_ptr[p + 1]):
                if part[fringe[x]] == a or part[fringe[x]] == b:  # others left meanwhile
                    members[m] = fringe[x]
                    m += 1
        for _ in range(10):
            fall_over, fall = refine_once(
                a, b, members, m, indptr, indices, edge_weight, vertex_weight, part, load,
                capacity, slack, key, spot, heap_a, heap_b, log, patience,
            )  # fmt: skip
            gains[i] += fall
            if fall_over == 0 and fall == 0:
                break
