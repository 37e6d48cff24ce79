"""Data-parallel label moves with a second look.

Every boundary vertex proposes its best other part; each proposal is then looked at again as if
all better ones had been made, and stands only if it still does not lose. Both steps read the
old labels only, so ranges of vertices can go to any number of threads, and stretches of vertices
to any number of ranks: what others hold comes in as ghosts, numbered after a rank's own vertices.

Source: Gilbert, Madduri, Boman, Rajamanickam, arXiv:2304.13194 (2023), sec. 3 (label
propagation, "afterburner").
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["find_boundary", "look_again", "propose_moves", "spread_active"]


@jit
def find_boundary(
    start: int, stop: int, indptr: Array, indices: Array, part: Array, found: Array
) -> int:
    """List the vertices of `start:stop` with a neighbour in another part at `found[start:]`."""
    n = start
    for v in range(start, stop):
        p = part[v]
        for j in range(indptr[v], indptr[v + 1]):
            if part[indices[j]] != p:
                found[n] = v
                n += 1
                break
    return n - start


@jit
def propose_moves(
    start: int,
    stop: int,
    active: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    part: Array,
    n_parts: int,
    home_part: Array,
    home_price: Array,
    locked: Array,
    boldness: int,
    wish: Array,
    wish_gain: Array,
) -> int:
    """Write wishes (part or -1) of `active[start:stop]`; return their outward edge weight.

    A vertex may wish for a loss of up to `boldness`/256 of its links to its own part. The price
    of not being at home counts as a link to it (`home_part` may be empty).
    """
    link = np.zeros(n_parts, np.int64)
    near = np.empty(n_parts, np.int32)
    priced = len(home_part) > 0
    outward = 0
    for i in range(start, stop):
        v = active[i]
        own = part[v]
        n_near = 0
        for j in range(indptr[v], indptr[v + 1]):
            p = part[indices[j]]
            if link[p] == 0:
                near[n_near] = p
                n_near += 1
            link[p] += edge_weight[j]
        best = -1
        best_link = 0
        inside = link[own]
        if priced and home_part[v] == own:
            inside += home_price[v]
        for x in range(n_near):
            p = near[x]
            linked = link[p]
            link[p] = 0
            if p != own:
                outward += linked
                if priced and home_part[v] == p:
                    linked += home_price[v]
                if linked > best_link or (linked == best_link and p < best):
                    best = p
                    best_link = linked
        wish[v] = -1
        if best >= 0 and not locked[v]:
            gain = best_link - inside
            if gain <= 0:  # threads would grow along the edges of other parts
                n_best = 0
                for j in range(indptr[v], indptr[v + 1]):
                    n_best += 1 if part[indices[j]] == best else 0
                if n_best < 2:
                    continue
            if gain >= 0 or -gain * 256 < boldness * inside:
                wish[v] = best
                wish_gain[v] = gain
    return outward


@jit
def look_again(
    start: int,
    stop: int,
    active: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    part: Array,
    gid: Array,
    home_part: Array,
    home_price: Array,
    wish: Array,
    wish_gain: Array,
    stands: Array,
) -> None:
    """Mark in `stands` the wishes of `active[start:stop]` that lose nothing after better ones.

    Better is what gains more, or as much with a lower gid.
    """
    priced = len(home_part) > 0
    for i in range(start, stop):
        v = active[i]
        to = wish[v]
        stands[i] = False
        if to < 0:
            continue
        own = part[v]
        gain = 0
        if priced and home_part[v] == to:
            gain += home_price[v]
        if priced and home_part[v] == own:
            gain -= home_price[v]
        for j in range(indptr[v], indptr[v + 1]):
            u = indices[j]
            p = part[u]
            if wish[u] >= 0 and (
                wish_gain[u] > wish_gain[v] or (wish_gain[u] == wish_gain[v] and gid[u] < gid[v])
            ):
                p = wish[u]
            if p == to:
                gain += edge_weight[j]
            elif p == own:
                gain -= edge_weight[j]
        stands[i] = gain >= 0


@jit
def spread_active(
    active: Array,
    moved: Array,
    n_own: int,
    indptr: Array,
    indices: Array,
    part: Array,
    seen: Array,
    out: Array,
) -> int:
    """List the boundary vertices among `active`, `moved` and the own neighbours of `moved`.

    `seen` is all False before and after; returns the length of the list in `out`.
    """
    n = 0
    for i in range(len(active)):
        if not seen[active[i]]:
            out[n] = active[i]
            seen[active[i]] = True
            n += 1
    for i in range(len(moved)):
        v = moved[i]
        for j in range(indptr[v] - 1, indptr[v + 1]):
            u = v if j < indptr[v] else indices[j]
            if u < n_own and not seen[u]:
                seen[u] = True
                out[n] = u
                n += 1
    kept = 0
    for i in range(n):
        v = out[i]
        seen[v] = False
        p = part[v]
        for j in range(indptr[v], indptr[v + 1]):
            if part[indices[j]] != p:
                out[kept] = v
                kept += 1
                break
    return kept
