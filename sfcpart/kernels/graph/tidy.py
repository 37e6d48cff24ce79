"""Moves that cost nothing and let parts part that hardly touch; data-parallel."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["wish_tidy"]


@jit
def find_pair(code: Array, p: int, q: int, n_parts: int) -> int:
    """Return the place of a pair in the ascending codes, -1 if it is not there."""
    wanted = int(min(p, q)) * n_parts + int(max(p, q))
    low = 0
    high = len(code)
    while low < high:
        middle = (low + high) // 2
        if code[middle] < wanted:
            low = middle + 1
        else:
            high = middle
    return low if low < len(code) and code[low] == wanted else -1


@jit
def wish_tidy(
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
    code: Array,
    tiny: Array,
    wish: Array,
    wish_gain: Array,
) -> None:
    """Write wishes (part or -1) of `vertices[start:stop]` and what they gain (>= 0).

    A vertex of a part that hardly touches another one there (`tiny`, for each of the ascending
    pairs `code`) may go to a part with room if the cost does not rise and no two parts touch that
    did not: what is left of the contact is less, or none.
    """
    n_parts = len(load)
    link = np.zeros(n_parts, np.int64)
    near = np.empty(n_parts, np.int32)
    priced = len(home_part) > 0
    for i in range(start, stop):
        v = vertices[i]
        own = part[v]
        wish[v] = -1
        n_near = 0
        for j in range(indptr[v], indptr[v + 1]):
            p = part[indices[j]]
            if link[p] == 0:
                near[n_near] = p
                n_near += 1
            link[p] += edge_weight[j]
        touches = False
        for x in range(n_near):
            if near[x] != own:
                at = find_pair(code, own, near[x], n_parts)
                touches = touches or (at >= 0 and tiny[at])
        stay = link[own]
        if priced and home_part[v] == own:
            stay += home_price[v]
        best = -1
        best_gain = 0
        for x in range(n_near if touches else 0):
            p = near[x]
            gain = link[p] - stay
            if priced and home_part[v] == p:
                gain += home_price[v]
            if p == own or gain < 0 or load[p] + vertex_weight[v] > capacity[p]:
                continue
            fits = True
            for y in range(n_near):
                q = near[y]
                if q not in (p, own) and find_pair(code, p, q, n_parts) < 0:
                    fits = False
            if fits and (best < 0 or gain > best_gain or (gain == best_gain and p < best)):
                best = p
                best_gain = gain
        for x in range(n_near):
            link[near[x]] = 0
        wish[v] = best
        wish_gain[v] = best_gain
