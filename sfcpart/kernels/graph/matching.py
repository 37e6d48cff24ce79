"""Pair vertices of a graph along heavy edges, data-parallel and with written tie rules.

Every free vertex points at its best free neighbour; two that point at each other are paired;
a few rounds of this leave few free vertices (locally dominant edges, a half-approximation of
the heaviest matching); if many are left, they are paired one after the other. Ties go to the edge
with the larger hash, which both ends see alike, so the result does not depend on the number of
threads.
"""

from __future__ import annotations

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["accept_mutual", "pair_in_turn", "pair_leftovers", "point_at_best"]


@jit
def edge_hash(u: int, v: int, seed: int) -> int:
    """Mix two vertex numbers and a seed into 31 bits, alike for (u, v) and (v, u)."""
    low = int(min(u, v))
    high = int(max(u, v))
    mixed = (low * 73856093 + high * 19349663 + seed * 83492791) & 0x7FFFFFFF
    mixed = ((mixed ^ (mixed >> 15)) * 0x2C1B3C6D) & 0x7FFFFFFF
    mixed = ((mixed ^ (mixed >> 12)) * 0x297A2D39) & 0x7FFFFFFF
    return mixed ^ (mixed >> 15)


@jit
def best_mate(
    v: int,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    label: Array,
    mate: Array,
    heaviest: int,
    seed: int,
) -> int:
    """Return the best free neighbour of v with its label (-1: none), for a pair not too heavy.

    Rated by (edge weight)^2 / (product of vertex weights).
    """
    best = -1
    best_rating = -1.0
    best_hash = -1
    weight_v = vertex_weight[v]
    for j in range(indptr[v], indptr[v + 1]):
        u = indices[j]
        if mate[u] >= 0 or label[u] != label[v] or weight_v + vertex_weight[u] > heaviest:
            continue
        w = float(edge_weight[j])
        rating = w * w / (float(max(1, weight_v)) * float(max(1, vertex_weight[u])))
        if rating < best_rating:
            continue
        tie = edge_hash(u, v, seed)
        if rating > best_rating or tie > best_hash or (tie == best_hash and u > best):
            best = u
            best_rating = rating
            best_hash = tie
    return best


@jit
def point_at_best(
    start: int,
    stop: int,
    free: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    label: Array,
    mate: Array,
    heaviest: int,
    seed: int,
    choice: Array,
) -> None:
    """Write the best free neighbour of `free[start:stop]` to `choice` (-1: none)."""
    for i in range(start, stop):
        choice[free[i]] = best_mate(
            free[i], indptr, indices, edge_weight, vertex_weight, label, mate, heaviest, seed
        )


@jit
def accept_mutual(start: int, stop: int, free: Array, choice: Array, mate: Array) -> int:
    """Pair those of `free[start:stop]` whose choice points back; return how many found a mate."""
    paired = 0
    for i in range(start, stop):
        v = free[i]
        u = choice[v]
        if u >= 0 and choice[u] == v:
            mate[v] = u
            paired += 1
    return paired


@jit
def pair_in_turn(
    free: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    label: Array,
    mate: Array,
    heaviest: int,
    seed: int,
) -> None:
    """Pair free vertices with their best free neighbours one after the other.

    Where edges get heavier and heavier along a path, as through wall layers, each round of
    pointing pairs only its end.
    """
    for i in range(len(free)):
        v = free[i]
        if mate[v] >= 0:
            continue
        u = best_mate(v, indptr, indices, edge_weight, vertex_weight, label, mate, heaviest, seed)
        if u >= 0:
            mate[u] = v
            mate[v] = u


@jit
def pair_leftovers(
    free: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    label: Array,
    mate: Array,
    heaviest: int,
    waiting: Array,
) -> int:
    """Pair free vertices that share their heaviest neighbour (two hops apart), in vertex order.

    Vertices without any neighbour are paired with each other per label. `waiting` is scratch,
    (n_vertices + 1,) of -1 on entry and garbage on return.
    """
    n = len(mate)
    paired = 0
    for i in range(len(free)):
        v = free[i]
        if mate[v] >= 0:
            continue
        hub = n
        hub_weight = -1
        for j in range(indptr[v], indptr[v + 1]):
            if edge_weight[j] > hub_weight and label[indices[j]] == label[v]:
                hub = indices[j]
                hub_weight = edge_weight[j]
        u = waiting[hub]
        if u < 0 or label[u] != label[v] or vertex_weight[u] + vertex_weight[v] > heaviest:
            if u < 0 or vertex_weight[v] < vertex_weight[u]:
                waiting[hub] = v
            continue
        mate[u] = v
        mate[v] = u
        waiting[hub] = -1
        paired += 2
    return paired
