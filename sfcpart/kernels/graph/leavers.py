"""Where the vertices of overloaded parts would go, and what that costs; data-parallel."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["rate_leavers"]


@jit
def rate_leavers(
    start: int,
    stop: int,
    vertices: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    home_part: Array,
    home_price: Array,
    load: Array,
    capacity: Array,
    distance: Array,
    target: Array,
    loss: Array,
) -> None:
    """Write the best target (-1: none) and the loss of moving there of `vertices[start:stop]`.

    A target is a part next to the vertex with room for it, or one nearer to a part with room
    (`distance`, in steps over neighbouring parts). The price of not being at home counts as a
    link to it. Ties go to the part with more room, then to the lower.
    """
    link = np.zeros(len(load), np.int64)
    near = np.empty(len(load), np.int32)
    priced = len(home_part) > 0
    for i in range(start, stop):
        v = vertices[i]
        own = part[v]
        n_near = 0
        for j in range(indptr[v], indptr[v + 1]):
            p = part[indices[j]]
            if link[p] == 0:
                near[n_near] = p
                n_near += 1
            link[p] += edge_weight[j]
        inside = link[own]
        if priced and home_part[v] == own:
            inside += home_price[v]
        best = -1
        best_link = 0
        best_room = 0
        for x in range(n_near):
            p = near[x]
            linked = link[p]
            link[p] = 0
            if priced and home_part[v] == p:
                linked += home_price[v]
            room = capacity[p] - load[p] - vertex_weight[v]
            if p == own or (room < 0 and distance[p] >= distance[own]):
                continue
            if (
                best < 0
                or linked > best_link
                or (linked == best_link and (room > best_room or (room == best_room and p < best)))
            ):
                best = p
                best_link = linked
                best_room = room
        target[i] = best if vertex_weight[v] > 0 else -1
        loss[i] = inside - best_link
