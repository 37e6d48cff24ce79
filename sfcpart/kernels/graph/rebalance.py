"""Shed the excess of overloaded parts at the least rise of the cut; and who neighbours whom."""

from __future__ import annotations

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.graph.heap import drop, put

__all__ = ["least_loss", "link_parts", "shed_excess"]


@jit
def link_parts(
    boundary: Array, indptr: Array, indices: Array, part: Array, touching: Array
) -> None:
    """Mark pairs of parts joined by an edge in `touching` (n_parts, n_parts)."""
    for i in range(len(boundary)):
        v = boundary[i]
        for j in range(indptr[v], indptr[v + 1]):
            touching[part[v], part[indices[j]]] = True


@jit
def least_loss(
    v: int,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    capacity: Array,
    distance: Array,
    link: Array,
    near: Array,
) -> tuple[int, int]:
    """Return (gain, part) of the best part next to v with room, or nearer to room than v's own."""
    own = part[v]
    n_near = 0
    for j in range(indptr[v], indptr[v + 1]):
        p = part[indices[j]]
        if link[p] == 0:
            near[n_near] = p
            n_near += 1
        link[p] += edge_weight[j]
    inside = link[own]
    best = -1
    best_link = 0
    best_room = 0
    for i in range(n_near):
        p = near[i]
        link_p = link[p]
        link[p] = 0
        room = capacity[p] - load[p] - vertex_weight[v]
        if p == own or (room < 0 and distance[p] >= distance[own]) or link_p < best_link:
            continue
        if best < 0 or link_p > best_link or room > best_room:
            best = p
            best_link = link_p
            best_room = room
    return best_link - inside, best


@jit
def splits_part(
    v: int, indptr: Array, indices: Array, part: Array, mark: Array, queue: Array, reach: int
) -> bool:
    """Whether taking v out may split its part: its own-part neighbours do not meet near it.

    Looks at no more than `reach` vertices. `mark` is zero before and after.
    """
    own = part[v]
    wanted = 0
    last = 0
    for j in range(indptr[v], indptr[v + 1]):
        u = indices[j]
        if part[u] == own and mark[u] == 0 and u != v:
            mark[u] = 1
            wanted += 1
            if last == 0:
                queue[0] = u
                last = 1
    if wanted == 0:  # a piece of its own
        return False
    met = 1
    mark[queue[0]] = 2
    mark[v] = 2
    i = 0
    while i < last and met < wanted and last < reach:
        w = queue[i]
        i += 1
        for j in range(indptr[w], indptr[w + 1]):
            u = indices[j]
            if part[u] == own and mark[u] != 2 and last < reach:
                if mark[u] == 1:
                    met += 1
                mark[u] = 2
                queue[last] = u
                last += 1
    for i in range(last):
        mark[queue[i]] = 0
    for j in range(indptr[v], indptr[v + 1]):
        mark[indices[j]] = 0
    mark[v] = 0
    return met < wanted


@jit
def shed_excess(
    boundary: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    capacity: Array,
    distance: Array,
    key: Array,
    spot: Array,
    heap: Array,
    link: Array,
    near: Array,
    reach: int,
    mark: Array,
    queue: Array,
) -> int:
    """Move vertices out of overloaded parts, least loss per weight first; return how many.

    A move goes to a part with room, or to one nearer to a part with room (`distance`, in steps
    over neighbouring parts), so repeated calls carry the excess to where it fits. With `reach`
    > 0 vertices whose leaving may split their part stay (seen from `reach` vertices around).
    """
    size = 0
    for i in range(len(boundary)):
        v = boundary[i]
        if load[part[v]] <= capacity[part[v]] or vertex_weight[v] == 0:
            continue
        gain, to = least_loss(
            v, indptr, indices, edge_weight, vertex_weight, part, load, capacity, distance,
            link, near,
        )  # fmt: skip
        if to >= 0:
            w = vertex_weight[v]
            size = put(heap, spot, key, v, gain * 256 if gain > 0 else (gain * 256) // w, size)
    n_moves = 0
    while size > 0:
        v = heap[0]
        own = part[v]
        if load[own] <= capacity[own]:
            size = drop(heap, spot, key, v, size)
            continue
        gain, to = least_loss(
            v, indptr, indices, edge_weight, vertex_weight, part, load, capacity, distance,
            link, near,
        )  # fmt: skip
        if to < 0:
            size = drop(heap, spot, key, v, size)
            continue
        w = vertex_weight[v]
        rank = gain * 256 if gain > 0 else (gain * 256) // w
        if rank < key[v]:
            size = put(heap, spot, key, v, rank, size)
            if heap[0] != v:
                continue
        size = drop(heap, spot, key, v, size)
        if reach > 0 and splits_part(v, indptr, indices, part, mark, queue, reach):
            continue
        load[own] -= w
        load[to] += w
        part[v] = to
        n_moves += 1
        for j in range(indptr[v], indptr[v + 1]):
            u = indices[j]
            p = part[u]
            if p != own or load[p] <= capacity[p] or vertex_weight[u] == 0:
                continue
            gain, dest = least_loss(
                u, indptr, indices, edge_weight, vertex_weight, part, load, capacity, distance,
                link, near,
            )  # fmt: skip
            if dest >= 0:
                w = vertex_weight[u]
                size = put(heap, spot, key, u, gain * 256 if gain > 0 else (gain * 256) // w, size)
    return n_moves
