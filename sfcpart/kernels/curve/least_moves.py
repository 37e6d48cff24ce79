"""Where to cut a line again so that least weight leaves the chunk it is in.

Chunk p keeps the weight of what it takes of its *home stretch*, the sums `home[p, 0]` to
`home[p, 1]` of the line. What all keep is a sum over the cuts alone,
sum over j of K_(j-1)(c_j) - K_j(c_j) with K_p(y) the weight of the home stretch of p before y, and
the most each chunk may weigh ties neighbouring cuts only: a dynamic programme over cuts, whose
maximum over the cuts a chunk can begin at is one over a window that slides (a queue of candidates,
each seen once). Cost: the positions of all windows.

`reach_up` and `reach_down` find how far cuts can get if every chunk before (after) them is as full
as it may be, or they stop at a wanted position. Here a position is a row of `sums`, the weight
before it (and of `limits`, a second weight, if there is one).

Source: sliding maxima by a monotone queue, common practice, no source; dynamic programming over
cuts as in B. W. Kernighan, J. ACM 18:34 (1971), from memory.
"""

from __future__ import annotations

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.curve.chunks import count_up_to

__all__ = ["least_moves", "reach_down", "reach_up"]

_DEAD = -(1 << 62)


@jit
def reach_up(
    aim: Int64Array,
    sums: Int64Array,
    limits: Int64Array,
    most: Int64Array,
    most_limited: Int64Array,
    beyond: int,
    cut: Int64Array,
) -> None:
    """Place cuts from the second on, each at its aim or as far as the chunk before it may reach.

    `beyond` rows are added to how far it reaches: 1 where rows are ends of blocks of positions.
    """
    last = len(sums) - 1
    for part in range(len(most)):
        at = cut[part]
        furthest = count_up_to(sums, sums[at] + most[part]) - 1
        if len(limits):
            room = limits[at] + most_limited[part]
            furthest = min(furthest, count_up_to(limits, room) - 1)
        cut[part + 1] = min(aim[part + 1], min(furthest + beyond, last))


@jit
def reach_down(
    aim: Int64Array,
    sums: Int64Array,
    limits: Int64Array,
    most: Int64Array,
    most_limited: Int64Array,
    beyond: int,
    cut: Int64Array,
) -> None:
    """Place cuts from the last but one down, each at its aim or as low as its chunk reaches."""
    for part in range(len(most) - 1, -1, -1):
        at = cut[part + 1]
        lowest = count_up_to(sums, sums[at] - most[part] - 1)
        if len(limits):
            lowest = max(lowest, count_up_to(limits, limits[at] - most_limited[part] - 1))
        cut[part] = max(aim[part], max(lowest - beyond, 0))


@jit
def kept_before(sums: Int64Array, y: int, home: Int64Array, p: int) -> int:
    """Return the weight of the home stretch of chunk p before position y."""
    return int(min(max(sums[y], home[p, 0]), home[p, 1]) - home[p, 0])


@jit
def least_moves(
    low: Int64Array,
    high: Int64Array,
    sums: Int64Array,
    limits: Int64Array,
    most: Int64Array,
    most_limited: Int64Array,
    home: Int64Array,
    value: Int64Array,
    queue: Int64Array,
    back_ptr: Int64Array,
    back: Int32Array,
    chosen: Int64Array,
) -> int:
    """Choose one position of each window so that the chunks keep most; return what they keep.

    Window j is `low[j] <= y <= high[j]`, ascending in j; chunks have one position at least. Among
    equal choices each cut, from the last, takes the lowest position. -1 if no choice keeps the
    bounds.

    `value` (2, widest window), `queue` (widest window) and `back` (all windows) are scratch.
    """
    n_parts = len(most)
    value[0, 0] = 0
    row = 0
    for j in range(1, n_parts + 1):
        start, stop, add = low[j - 1], high[j - 1], low[j - 1]
        head, tail = 0, 0
        for y in range(low[j], high[j] + 1):
            while add <= stop and add < y:
                found = value[row, add - start]
                if found > _DEAD:
                    while tail > head and value[row, queue[tail - 1] - start] < found:
                        tail -= 1
                    queue[tail] = add
                    tail += 1
                add += 1
            while head < tail and sums[y] - sums[queue[head]] > most[j - 1]:
                head += 1
            if len(limits):
                while head < tail and limits[y] - limits[queue[head]] > most_limited[j - 1]:
                    head += 1
            spot = y - low[j]
            if head == tail:
                value[1 - row, spot] = _DEAD
                back[back_ptr[j] + spot] = -1
                continue
            x = queue[head]
            gain = kept_before(sums, y, home, j - 1)
            if j < n_parts:
                gain -= kept_before(sums, y, home, j)
            value[1 - row, spot] = value[row, x - start] + gain
            back[back_ptr[j] + spot] = x - start
        row = 1 - row
    kept = int(value[row, high[n_parts] - low[n_parts]])
    if kept == _DEAD:
        return -1
    chosen[n_parts] = high[n_parts]
    for j in range(n_parts, 0, -1):
        chosen[j - 1] = low[j - 1] + back[back_ptr[j] + chosen[j] - low[j]]
    return kept
