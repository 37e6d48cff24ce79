"""Least cut between two parts within a band around their border, from packed rows.

The band of a pair comes as rows whose entries go to other rows, or to what lies behind the band
on either side: source and sink. How much of the band is used follows from the room that the parts
have. Which vertices a least cut leaves on either side does not depend on the order of the rows, so
neither does the answer depend on who sent them.

Source: flow-based refinement of partitions, Sanders, Schulz, ESA 2011 (from memory).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.graph.cut_trees import (
    HEAD,
    N_COLUMNS,
    SINK,
    SOURCE,
    TREE,
    TWIN,
    push_flow,
)
from sfcpart.kernels.graph.flow import PUSHES

__all__ = ["place_borders"]

TRIES = 3
"""A border that overloads a part is sought again in a narrower band."""

NARROWER = 0.4


@jit
def choose_rows(
    first: int, stop: int, row_at: Array, row_note: Array, row_weight: Array, limit_a: int,
    limit_b: int, held: Array, local: Array, chosen: Array,
) -> int:  # fmt: skip
    """Choose the first layers, and shares of one more, that weigh no more than the limits.

    `local` becomes the number among the chosen, or -1, -2 for those left out on either side.
    """
    n_places = held.shape[1]
    for s in range(2):
        for x in range(n_places):
            held[s, x] = 0
    for i in range(first, stop):
        note = row_note[row_at[i]]
        held[note & 1, note >> 1] += row_weight[row_at[i]]
    last_a = 0
    weight = 0
    while last_a < n_places and weight + held[0, last_a] <= limit_a:
        weight += held[0, last_a]
        last_a += 1
    last_b = 0
    weight = 0
    while last_b < n_places and weight + held[1, last_b] <= limit_b:
        weight += held[1, last_b]
        last_b += 1
    n = 0
    for i in range(first, stop):
        note = row_note[row_at[i]]
        side = note & 1
        if (note >> 1) < (last_b if side else last_a):
            local[i - first] = n
            chosen[n] = i - first
            n += 1
        else:
            local[i - first] = -1 - side
    return n


@jit
def join_rows(
    n: int, first: int, row_at: Array, row_first: Array, row_note: Array, entry_to: Array,
    entry_weight: Array, local: Array, chosen: Array, ptr: Array, arc: Array, left: Array,
    source: Array, sink: Array, fill: Array,
) -> int:  # fmt: skip
    """Write the arcs between chosen rows (each with its twin) and the links to either side.

    Returns what the present border cuts of them.
    """
    ptr[0] = 0
    border = 0
    for i in range(n):
        r = row_at[first + chosen[i]]
        side = row_note[r] & 1
        count = 0
        source[i] = 0
        sink[i] = 0
        for e in range(row_first[r], row_first[r + 1]):
            to = entry_to[e]
            if to >= 0:
                to = local[to]
            if to >= 0:
                count += 1
            elif to == -1:
                source[i] += entry_weight[e]
            elif to == -2:
                sink[i] += entry_weight[e]
        border += source[i] if side else sink[i]
        ptr[i + 1] = ptr[i] + count
        fill[i] = ptr[i]
    for i in range(n):
        r = row_at[first + chosen[i]]
        side = row_note[r] & 1
        for e in range(row_first[r], row_first[r + 1]):
            if entry_to[e] < 0:
                continue
            h = local[entry_to[e]]
            if h <= i:
                continue
            if (row_note[row_at[first + chosen[h]]] & 1) != side:
                border += entry_weight[e]
            x = fill[i]
            y = fill[h]
            fill[i] += 1
            fill[h] += 1
            arc[x, HEAD] = h
            arc[y, HEAD] = i
            arc[x, TWIN] = y
            arc[y, TWIN] = x
            left[x] = entry_weight[e]
            left[y] = entry_weight[e]
    return border


@jit
def place_borders(
    start: int,
    stop: int,
    row_ptr: Array,
    row_at: Array,
    row_first: Array,
    row_note: Array,
    row_weight: Array,
    entry_to: Array,
    entry_weight: Array,
    load: Array,
    capacity: Array,
    n_places: int,
    stretch: float,
    side: Array,
    gain: Array,
) -> None:
    """Find the best border of pairs `start:stop`; write the sides of rows, falls and new loads.

    Pair i has the rows `row_at[row_ptr[i]:row_ptr[i + 1]]`, in the order of their slots. `load` and
    `capacity` are (n_pairs, 2). A band weighs at most `stretch` times what the other part has room
    for; a cut that overloads a part is refused and the band narrowed. A gain of -1 means that
    vertices moved at equal cut.
    """
    longest = 1
    widest = 1
    for i in range(start, stop):
        longest = max(longest, row_ptr[i + 1] - row_ptr[i])
        entries = 0
        for x in range(row_ptr[i], row_ptr[i + 1]):
            entries += row_first[row_at[x] + 1] - row_first[row_at[x]]
        widest = max(widest, entries)
    held = np.zeros((2, n_places), np.int64)
    local = np.empty(longest, np.int32)
    chosen = np.empty(longest, np.int32)
    node = np.empty((longest, N_COLUMNS), np.int32)
    waiting = np.empty(longest, np.int32)
    orphans = np.empty(longest, np.int32)
    fill = np.empty(longest, np.int64)
    ptr = np.empty(longest + 1, np.int64)
    source = np.empty(longest, np.int64)
    sink = np.empty(longest, np.int64)
    arc = np.empty((widest, 2), np.int32)
    left = np.empty(widest, np.int64)
    for i in range(start, stop):
        first = row_ptr[i]
        gain[i] = 0
        for x in range(first, row_ptr[i + 1]):
            side[row_at[x]] = row_note[row_at[x]] & 1
        most_a = capacity[i, 0]
        most_b = capacity[i, 1]
        load_a = load[i, 0]
        total = load_a + load[i, 1]
        widen = stretch
        for _ in range(TRIES):
            # at most half a part, so that something is left to be source or sink
            limit_a = min(load_a // 2, int(widen * max(0, most_b - load[i, 1])) + 1)
            limit_b = min(load[i, 1] // 2, int(widen * max(0, most_a - load_a)) + 1)
            n = choose_rows(
                first, row_ptr[i + 1], row_at, row_note, row_weight, limit_a, limit_b, held,
                local, chosen,
            )  # fmt: skip
            border = join_rows(
                n, first, row_at, row_first, row_note, entry_to, entry_weight, local, chosen, ptr,
                arc, left, source, sink, fill,
            )  # fmt: skip
            value = push_flow(
                n, ptr, fill, arc, left, source, sink, node, waiting, orphans, PUSHES * n
            )
            if value < 0:
                break
            small = load_a  # load of a if it keeps only the source's side; or all but the sink's
            large = load_a
            for x in range(n):
                r = row_at[first + chosen[x]]
                small += row_weight[r] * ((node[x, TREE] == SOURCE) - ((row_note[r] & 1) == 0))
                large += row_weight[r] * ((node[x, TREE] != SINK) - ((row_note[r] & 1) == 0))
            small_fits = small <= most_a and total - small <= most_b
            large_fits = large <= most_a and total - large <= most_b
            if small_fits or large_fits:
                # balance as far as capacities tell: the room both parts keep
                small_skew = abs((most_a - small) - (most_b - total + small))
                large_skew = abs((most_a - large) - (most_b - total + large))
                use_large = large_fits and (not small_fits or large_skew < small_skew)
                skew = large_skew if use_large else small_skew
                now = abs((most_a - load_a) - (most_b - load[i, 1]))
                if value < border or (value == border and skew < now):
                    for x in range(n):
                        to_a = node[x, TREE] == SOURCE or (use_large and node[x, TREE] != SINK)
                        side[row_at[first + chosen[x]]] = 0 if to_a else 1
                    load[i, 0] = large if use_large else small
                    load[i, 1] = total - load[i, 0]
                    gain[i] = border - value if value < border else -1
                break
            if value >= border:
                break
            widen *= NARROWER
