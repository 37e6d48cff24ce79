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

__all__ = ["place_borders"]

TRIES = 3
"""A border that overloads a part is sought again in a narrower band."""

NARROWER = 0.4

NO_END = 1 << 62
"""A flow is never given up: how many pushes it takes depends on the order of the rows."""


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
    entry_weight: Array, local: Array, chosen: Array, ptr: Array, stop: Array, arc: Array,
    left: Array, source: Array, sink: Array,
) -> int:  # fmt: skip
    """Write the arcs between chosen rows (each with its twin) and the links to either side.

    Returns what the present border cuts of them.
    """
    room = 0
    for i in range(n):
        r = row_at[first + chosen[i]]
        ptr[i] = room
        stop[i] = room
        room += row_first[r + 1] - row_first[r]
        source[i] = 0
        sink[i] = 0
    border = 0
    for i in range(n):
        r = row_at[first + chosen[i]]
        side = row_note[r] & 1
        for e in range(row_first[r], row_first[r + 1]):
            h = entry_to[e]
            if h >= 0:
                h = local[h]
            if h > i:
                x = stop[i]
                y = stop[h]
                stop[i] += 1
                stop[h] += 1
                arc[x, HEAD] = h
                arc[y, HEAD] = i
                arc[x, TWIN] = y
                arc[y, TWIN] = x
                left[x] = entry_weight[e]
                left[y] = entry_weight[e]
                if (row_note[row_at[first + chosen[h]]] & 1) != side:
                    border += entry_weight[e]
            elif h == -1:
                source[i] += entry_weight[e]
            elif h == -2:
                sink[i] += entry_weight[e]
        border += source[i] if side else sink[i]
    return border


@jit
def settle(
    n: int, first: int, row_at: Array, row_note: Array, row_weight: Array, chosen: Array,
    node: Array, load: Array, capacity: Array, fall: int, side: Array,
) -> int:  # fmt: skip
    """Move the border to a least cut that fits; return 0 if none does, 1 if so, 2 if it moved.

    There are two: the first part keeps only what the source reaches, or all but what reaches the
    sink. The one that leaves the parts' rooms more alike is taken, unless nothing is gained by it.
    `load` and `capacity` are those of the pair.
    """
    total = load[0] + load[1]
    small = load[0]
    large = load[0]
    for x in range(n):
        r = row_at[first + chosen[x]]
        now = 1 - (row_note[r] & 1)
        small += row_weight[r] * ((1 if node[x, TREE] == SOURCE else 0) - now)
        large += row_weight[r] * ((0 if node[x, TREE] == SINK else 1) - now)
    small_fits = small <= capacity[0] and total - small <= capacity[1]
    large_fits = large <= capacity[0] and total - large <= capacity[1]
    if not (small_fits or large_fits):
        return 0
    # balance as far as capacities tell: the room both parts keep
    lean = capacity[0] - capacity[1] + total
    small_skew = abs(lean - 2 * small)
    large_skew = abs(lean - 2 * large)
    use_large = large_fits and (not small_fits or large_skew < small_skew)
    skew = large_skew if use_large else small_skew
    if fall <= 0 and (fall < 0 or skew >= abs(lean - 2 * load[0])):
        return 1
    for x in range(n):
        tree = node[x, TREE]
        to_first = tree == SOURCE or (use_large and tree != SINK)
        side[row_at[first + chosen[x]]] = 0 if to_first else 1
    load[0] = large if use_large else small
    load[1] = total - load[0]
    return 2


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
    slim = np.empty((4, longest), np.int32)  # numbers among the chosen, scratch of the flow
    wide = np.empty((4, longest), np.int64)  # where arcs start and stop, capacities outside
    node = np.empty((longest, N_COLUMNS), np.int32)
    arc = np.empty((widest, 2), np.int32)
    left = np.empty(widest, np.int64)
    for i in range(start, stop):
        first = row_ptr[i]
        gain[i] = 0
        for x in range(first, row_ptr[i + 1]):
            side[row_at[x]] = row_note[row_at[x]] & 1
        widen = stretch
        for _ in range(TRIES):
            # at most half a part, so that something is left to be source or sink
            room_a = capacity[i, 0] - load[i, 0]
            room_b = capacity[i, 1] - load[i, 1]
            n = choose_rows(
                first, row_ptr[i + 1], row_at, row_note, row_weight,
                min(load[i, 0] // 2, int(widen * max(0, room_b)) + 1),
                min(load[i, 1] // 2, int(widen * max(0, room_a)) + 1), held, slim[0], slim[1],
            )  # fmt: skip
            border = join_rows(
                n, first, row_at, row_first, row_note, entry_to, entry_weight, slim[0], slim[1],
                wide[0], wide[1], arc, left, wide[2], wide[3],
            )  # fmt: skip
            value = push_flow(
                n, wide[0], wide[1], arc, left, wide[2], wide[3], node, slim[2], slim[3], NO_END
            )
            fall = border - value
            how = settle(
                n, first, row_at, row_note, row_weight, slim[1], node, load[i], capacity[i], fall,
                side,
            )  # fmt: skip
            if how == 2:
                gain[i] = fall if fall > 0 else -1
            if how > 0 or fall <= 0:
                break
            widen *= NARROWER
