"""Bands of vertices around the borders between pairs of parts: mark, number and pack them.

Pairs share no part, so a vertex is in one band at most and ranges of parts or pairs can go to any
number of threads. A rank marks its own vertices; what other ranks marked comes in as the layers
and slots of ghosts.
"""

from __future__ import annotations

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["grow_layer", "number_bands", "pack_bands", "pull_layer", "start_bands"]

SHARES = 256
"""A layer is divided into so many shares, of which a band may hold the first few only."""


@jit
def start_bands(
    start: int,
    stop: int,
    sides: Array,
    mate: Array,
    fringe_ptr: Array,
    fringe: Array,
    indptr: Array,
    indices: Array,
    part: Array,
    layer: Array,
    band: Array,
    band_start: Array,
    band_stop: Array,
) -> None:
    """List the boundary vertices of the parts `sides[start:stop]` that touch their mates.

    The list of part a starts at `band[band_start[a]]`; `layer` of those vertices becomes 0.
    """
    for s in range(start, stop):
        a = sides[s]
        b = mate[a]
        last = band_start[a]
        for i in range(fringe_ptr[a], fringe_ptr[a + 1]):
            v = fringe[i]
            if part[v] != a:
                continue
            for j in range(indptr[v], indptr[v + 1]):
                if part[indices[j]] == b:
                    layer[v] = 0
                    band[last] = v
                    last += 1
                    break
        band_stop[a] = last


@jit
def grow_layer(
    start: int,
    stop: int,
    sides: Array,
    n_own: int,
    depth: int,
    indptr: Array,
    indices: Array,
    part: Array,
    layer: Array,
    band: Array,
    layer_start: Array,
    band_stop: Array,
) -> None:
    """Append the own vertices next to layer `depth - 1` of the parts `sides[start:stop]`."""
    for s in range(start, stop):
        a = sides[s]
        layer_stop = band_stop[a]
        last = layer_stop
        for i in range(layer_start[a], layer_stop):
            v = band[i]
            for j in range(indptr[v], indptr[v + 1]):
                u = indices[j]
                if u < n_own and part[u] == a and layer[u] < 0:
                    layer[u] = depth
                    band[last] = u
                    last += 1
        layer_start[a] = layer_stop
        band_stop[a] = last


@jit
def pull_layer(
    rim: Array,
    mate: Array,
    depth: int,
    n_own: int,
    indptr: Array,
    indices: Array,
    part: Array,
    layer: Array,
    band: Array,
    band_stop: Array,
) -> None:
    """Append those of `rim` (own vertices next to ghosts) next to a ghost of layer `depth - 1`."""
    for i in range(len(rim)):
        v = rim[i]
        a = part[v]
        if mate[a] < 0 or layer[v] >= 0:
            continue
        for j in range(indptr[v], indptr[v + 1]):
            u = indices[j]
            if u >= n_own and part[u] == a and layer[u] == depth - 1:
                layer[v] = depth
                band[band_stop[a]] = v
                band_stop[a] += 1
                break


@jit
def number_bands(
    start: int,
    stop: int,
    pairs: Array,
    band: Array,
    band_start: Array,
    band_stop: Array,
    indptr: Array,
    first_slot: Array,
    slot: Array,
    n_entries: Array,
) -> None:
    """Number the band vertices of pairs `start:stop` from `first_slot` on; count their entries."""
    for i in range(start, stop):
        number = first_slot[i]
        entries = 0
        for side in range(2):
            a = pairs[i, side]
            for x in range(band_start[a], band_stop[a]):
                v = band[x]
                slot[v] = number
                number += 1
                entries += indptr[v + 1] - indptr[v]
        n_entries[i] = entries


@jit
def pack_bands(
    start: int,
    stop: int,
    pairs: Array,
    band: Array,
    band_start: Array,
    band_stop: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    home_part: Array,
    home_price: Array,
    layer: Array,
    slot: Array,
    first_gid: int,
    shift: int,
    row_ptr: Array,
    entry_ptr: Array,
    row_vertex: Array,
    row_length: Array,
    row_note: Array,
    row_weight: Array,
    entry_to: Array,
    entry_weight: Array,
) -> None:
    """Write the rows of the bands of pairs `start:stop`, the first part's before the second's.

    An entry goes to a slot, to what lies behind the band on the first or second part's side (-1,
    -2), or nowhere (-3). A vertex at home in one of the parts has an entry more: what leaving
    costs. `row_note` is twice the place in the band (layer, then share), plus the side.
    """
    with_home = 1 if len(home_part) > 0 else 0
    for i in range(start, stop):
        row = row_ptr[i]
        e = entry_ptr[i]
        a = pairs[i, 0]
        b = pairs[i, 1]
        for side in range(2):
            own = pairs[i, side]
            for x in range(band_start[own], band_stop[own]):
                v = band[x]
                mixed = ((int(first_gid + v) >> shift) * 0x9E3779B1) & 0xFFFFFFFF
                share = (mixed >> 24) & (SHARES - 1)
                row_vertex[row] = v
                row_note[row] = 2 * (int(layer[v]) * SHARES + share) + side
                row_weight[row] = vertex_weight[v]
                row_length[row] = indptr[v + 1] - indptr[v] + with_home
                row += 1
                for j in range(indptr[v], indptr[v + 1]):
                    u = indices[j]
                    p = part[u]
                    to = -3
                    if p in (a, b):
                        to = slot[u]
                        if to < 0:
                            to = -1 if p == a else -2
                    entry_to[e] = to
                    entry_weight[e] = edge_weight[j]
                    e += 1
                if with_home:
                    home = home_part[v]
                    entry_to[e] = -1 if home == a else -2 if home == b else -3
                    entry_weight[e] = home_price[v]
                    e += 1
