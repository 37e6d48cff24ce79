"""Rebalancing over ranks: shed the excess of overloaded parts where it costs least.

Boundary vertices of overloaded parts queue by loss per weight; the first ones that make up the
excess go to parts with room, or to parts nearer to one with room, so that repeated rounds carry
the excess to where it fits. A part takes no more than it has room for.

Source: rebalancing by priority buckets, Gilbert et al., arXiv:2304.13194 (2023), sec. 3.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.kernels.graph.leavers import rate_leavers
from sfcpart.kernels.threads import run_ranges
from sfcpart.methods.smoothing.borders import touching_pairs
from sfcpart.methods.smoothing.queues import bucket_of, weight_before
from sfcpart.methods.smoothing.state import State

__all__ = ["fill_empty_parts", "rebalance", "steps_to_room"]

IDLE = 4
"""Rounds without a lower overload after which rebalancing gives up."""


def rebalance(state: State) -> Int32Array:
    """Shed excess until none is left or nothing helps; return this rank's vertices that moved."""
    lowest, idle, best = state.overload, 0, state.part.copy()
    moved: list[Array] = [np.empty(0, np.int32)]
    near = True  # at first only to neighbours with room, which takes no distances
    while lowest > 0 and idle < IDLE:
        leavers, to = _leavers(state, near=near)
        near, was_near = False, near
        if int(state.graph.comm.allreduce(np.array([len(leavers)]))[0]) == 0:
            if was_near:
                continue
            break
        state.move(leavers, to)
        moved.append(leavers)
        idle = 0 if state.overload < lowest else idle + 1
        if state.overload < lowest:
            lowest = state.overload
            best[:] = state.part
    if state.overload > lowest:
        state.restore(best)
    return np.unique(np.concatenate(moved))


def _leavers(state: State, *, near: bool) -> tuple[Int32Array, Int32Array]:
    """Choose the vertices that leave in one round, and where to."""
    graph, comm, k = state.graph, state.graph.comm, state.n_parts
    boundary = state.boundary()
    boundary = boundary[(state.load > state.capacity)[state.part[boundary]]]
    distance = np.zeros(k, np.int32) if near else steps_to_room(state, touching_pairs(state)[0])
    target = np.empty(len(boundary), np.int32)
    loss = np.empty(len(boundary), np.int64)
    run_ranges(
        rate_leavers, len(boundary), boundary, *graph.rows, graph.vertex_weight, state.part,
        state.home_part, state.home_price, state.load, state.capacity, distance, target, loss,
        smallest=4096,
    )  # fmt: skip
    keep = target >= 0
    vertex, target, loss = boundary[keep], target[keep], loss[keep]
    weight = graph.vertex_weight[vertex]
    bucket = bucket_of(loss, weight)
    own = state.part[vertex]
    before = weight_before(comm, own, bucket, weight, k)
    keep = before < (state.load - state.capacity)[own]
    vertex, target, weight, bucket = vertex[keep], target[keep], weight[keep], bucket[keep]
    before = weight_before(comm, target, bucket, weight, k)
    room = (state.capacity - state.load)[target]
    keep = (before + weight <= room) | (room <= 0)
    return vertex[keep], target[keep]


def steps_to_room(state: State, pairs: Int32Array) -> Int32Array:
    """Steps over neighbouring parts from each part to one that has room; n_parts if none leads."""
    k = state.n_parts
    distance = np.full(k, k, np.int32)
    near = state.load < state.capacity
    step = 0
    while near.any():
        distance[near] = step
        step += 1
        reached = np.zeros(k, np.bool_)
        for a, b in (pairs.T, pairs[:, ::-1].T):
            reached[b[near[a]]] = True
        near = reached & (distance == k)
    return distance


def fill_empty_parts(state: State) -> None:
    """Give every empty part a vertex of a part with several, of the one with most to spare.

    The vertex with the fewest links inside goes; one part after the other.
    """
    graph, comm, k = state.graph, state.graph.comm, state.n_parts
    size = graph.sum_by(state.own, np.ones(graph.n, np.int64), k)
    empty = np.flatnonzero(size == 0)
    if not len(empty):
        return
    row = np.repeat(np.arange(graph.n), np.diff(graph.indptr))
    inside = np.zeros(graph.n, np.int64)
    same = state.part[row] == state.part[graph.indices]
    np.add.at(inside, row[same], graph.edge_weight[same])
    for p in empty:
        excess = (state.load - state.capacity)[state.own]
        chosen = _least(state, np.flatnonzero(size[state.own] > 1), (-excess, inside))
        if chosen is None:
            return
        own = state.own[chosen]
        size -= comm.allreduce(np.bincount(own, minlength=k).astype(np.int64))
        size[p] = 1
        state.move(chosen, np.full(len(chosen), p, np.int32))


def _least(state: State, among: Int64Array, keys: tuple[Int64Array, ...]) -> Int64Array | None:
    """Return the vertex (on its rank; none elsewhere) with the least keys, then the lowest gid."""
    comm, far = state.graph.comm, np.iinfo(np.int64).max
    gid = state.graph.first + np.arange(state.graph.n)
    for key in (*keys, gid):
        low = comm.allreduce(np.array([key[among].min(initial=far)], np.int64), "min")[0]
        among = among[key[among] == low] if low != far else among
    found = int(comm.allreduce(np.array([len(among)], np.int64))[0])
    return among if found else None
