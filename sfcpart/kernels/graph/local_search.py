"""Hill-climbing on a k-way partition from single seeds, each search with its own rollback.

Sources: boundary refinement with rollback, Fiduccia, Mattheyses 1982; many short searches, each
around one seed, Osipov, Sanders, ESA 2010 (both from memory). States as good as the best so far
are kept too: on tetrahedra that wandering cuts 5 % more than insisting on a gain.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.graph.heap import drop, put

__all__ = ["search_from_seeds"]

HUB = 1000
"""Vertices of higher degree move as seeds only: looking at them after every move costs too much."""


@jit
def best_move(
    v: int,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    weight: int,
    part: Array,
    room: Array,
    link: Array,
    near: Array,
) -> tuple[int, int]:
    """Return (gain, part) of the best part next to v with room for it; part -1 if there is none.

    Ties go to the part with more room. `link` (n_parts,) is zero before and after.
    """
    own = part[v]
    n_near = 0
    inside = 0
    for j in range(indptr[v], indptr[v + 1]):
        p = part[indices[j]]
        if p == own:
            inside += edge_weight[j]
            continue
        if link[p] == 0:
            near[n_near] = p
            n_near += 1
        link[p] += edge_weight[j]
    best = -1
    best_link = 0
    best_room = 0
    for i in range(n_near):
        p = near[i]
        link_p = link[p]
        link[p] = 0
        left = room[p] - weight
        if left < 0 or link_p < best_link:
            continue
        if link_p > best_link or left > best_room:
            best = p
            best_link = link_p
            best_room = left
    return best_link - inside, best


@jit
def search_from_seeds(
    seeds: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    room: Array,
    done: Array,
    key: Array,
    spot: Array,
    link: Array,
    near: Array,
    patience: int,
) -> int:
    """Search from each seed in turn; return the fall of the cut (>= 0).

    A search moves the best vertex around its seed again and again, every vertex at most once
    (`done`) and only where `room` (n_parts,) allows, until `patience` moves brought nothing
    better, then goes back to its last best state.
    """
    heap = np.empty(len(part), np.int32)
    log_vertex = np.empty(patience + 1, np.int32)
    log_part = np.empty(patience + 1, np.int32)
    total = 0
    for i in range(len(seeds)):
        s = seeds[i]
        if done[s]:
            continue
        gain, to = best_move(
            s, indptr, indices, edge_weight, vertex_weight[s], part, room, link, near
        )
        if to < 0:
            continue
        size = put(heap, spot, key, s, gain, 0)
        since = 0  # gain and moves since the best state
        n_moves = 0
        while size > 0 and n_moves < patience:
            v = heap[0]
            weight = vertex_weight[v]
            gain, to = best_move(v, indptr, indices, edge_weight, weight, part, room, link, near)
            if to < 0:
                size = drop(heap, spot, key, v, size)
                continue
            if gain < key[v]:  # its part filled up meanwhile
                size = put(heap, spot, key, v, gain, size)
                if heap[0] != v:
                    continue
            size = drop(heap, spot, key, v, size)
            done[v] = True
            log_vertex[n_moves] = v
            log_part[n_moves] = part[v]
            n_moves += 1
            room[part[v]] += weight
            room[to] -= weight
            part[v] = to
            since += gain
            if since >= 0:
                total += since
                since = 0
                n_moves = 0
            for j in range(indptr[v], indptr[v + 1]):
                u = indices[j]
                if done[u] or indptr[u + 1] - indptr[u] > HUB:
                    continue
                gain, to = best_move(
                    u, indptr, indices, edge_weight, vertex_weight[u], part, room, link, near
                )
                if to >= 0:
                    size = put(heap, spot, key, u, gain, size)
                elif spot[u] >= 0:
                    size = drop(heap, spot, key, u, size)
        while n_moves > 0:
            n_moves -= 1
            v = log_vertex[n_moves]
            room[part[v]] += vertex_weight[v]
            room[log_part[n_moves]] -= vertex_weight[v]
            part[v] = log_part[n_moves]
        for j in range(size):
            spot[heap[j]] = -1
    return total
