"""Move vertices over the border of a pair of parts until the first fits, without splitting it."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.graph.heap import drop, put

__all__ = ["shed_borders"]


@jit
def loss_of(
    r: int, first: int, row_at: Array, row_first: Array, entry_to: Array, entry_weight: Array,
    side: Array,
) -> tuple[int, int]:  # fmt: skip
    """Return what leaving the first part costs a row, and its links to the second."""
    loss = 0
    over = 0
    for e in range(row_first[r], row_first[r + 1]):
        to = entry_to[e]
        if to == -3:
            continue
        there = to == -2 or (to >= 0 and side[row_at[first + to]] == 1)
        if there:
            loss -= entry_weight[e]
            over += entry_weight[e]
        else:
            loss += entry_weight[e]
    return loss, over


@jit
def holds_together(
    x: int, first: int, row_at: Array, row_first: Array, entry_to: Array, side: Array,
    behind: Array, mark: Array, queue: Array, stamp: int,
) -> bool:  # fmt: skip
    """Whether the first part's neighbours of row x meet without it, in the band or behind it.

    `mark` holds no `stamp` or `stamp + 1` before.
    """
    r = row_at[first + x]
    wanted = 1 if behind[x] else 0
    last = 0
    for e in range(row_first[r], row_first[r + 1]):
        h = entry_to[e]
        if h >= 0 and side[row_at[first + h]] == 0 and mark[h] != stamp:
            mark[h] = stamp
            wanted += 1
            if last == 0:
                queue[0] = h
                last = 1
    if wanted <= 1:
        return wanted == 1
    if last == 0:
        return True
    mark[x] = stamp + 1
    mark[queue[0]] = stamp + 1
    met = 1
    back = False
    i = 0
    while i < last and met < wanted:
        y = queue[i]
        i += 1
        if behind[y] and not back:
            back = True  # what lies behind is one piece, and joins all that touch it
            if behind[x]:
                met += 1
            for z in range(len(behind)):
                if behind[z] and mark[z] != stamp + 1 and side[row_at[first + z]] == 0:
                    if mark[z] == stamp:
                        met += 1
                    mark[z] = stamp + 1
                    queue[last] = z
                    last += 1
        for e in range(row_first[row_at[first + y]], row_first[row_at[first + y] + 1]):
            h = entry_to[e]
            if h >= 0 and mark[h] != stamp + 1 and side[row_at[first + h]] == 0:
                if mark[h] == stamp:
                    met += 1
                mark[h] = stamp + 1
                queue[last] = h
                last += 1
    return met >= wanted


@jit
def shed_borders(
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
    """Move rows of the first parts of pairs `start:stop` to the second, least loss first.

    The arrays are those of `place_borders`; a gain is the fall of the cost (often negative), or
    -1 if there is none. A row moves only next to the second part, only if the first part holds
    together without it as far as the band tells, and only while the second has room.
    """
    for i in range(start, stop):
        first = row_ptr[i]
        n = row_ptr[i + 1] - first
        key = np.empty(n, np.int64)
        spot = np.full(n, -1, np.int32)
        heap = np.empty(n, np.int32)
        queue = np.empty(n, np.int32)
        mark = np.zeros(n, np.int64)
        behind = np.zeros(n, np.bool_)
        stamp = 1
        size = 0
        gain[i] = 0
        moved = False
        for x in range(n):
            r = row_at[first + x]
            side[r] = row_note[r] & 1
            for e in range(row_first[r], row_first[r + 1]):
                if side[r] == 0 and entry_to[e] == -1:
                    behind[x] = True
        # the first part's rows come by gid: then ties do not depend on who sent them
        for x in range(n):
            r = row_at[first + x]
            if side[r] == 0 and row_weight[r] > 0:
                loss, over = loss_of(r, first, row_at, row_first, entry_to, entry_weight, side)
                if over > 0:
                    size = put(heap, spot, key, x, -(loss * 256) // row_weight[r], size)
        while size > 0 and load[i, 0] > capacity[i, 0]:
            x = heap[0]
            r = row_at[first + x]
            size = drop(heap, spot, key, x, size)
            if load[i, 1] + row_weight[r] > capacity[i, 1]:
                continue
            stamp += 2
            if not holds_together(
                x, first, row_at, row_first, entry_to, side, behind, mark, queue, stamp
            ):
                continue
            loss, over = loss_of(r, first, row_at, row_first, entry_to, entry_weight, side)
            gain[i] -= loss
            moved = True
            side[r] = 1
            load[i, 0] -= row_weight[r]
            load[i, 1] += row_weight[r]
            for e in range(row_first[r], row_first[r + 1]):
                h = entry_to[e]
                if h < 0:
                    continue
                q = row_at[first + h]
                if side[q] == 0 and row_weight[q] > 0:
                    loss, over = loss_of(q, first, row_at, row_first, entry_to, entry_weight, side)
                    size = put(heap, spot, key, h, -(loss * 256) // row_weight[q], size)
        if moved and gain[i] == 0:
            gain[i] = -1
