"""Cut a line of items into contiguous chunks under a bottleneck: sweep back, then walk forward.

A cut is a position between items; chunk p takes the items from cut p to cut p + 1. Given the
most each chunk may hold, `sweep_back` finds, chunk by chunk from the last, the set of positions
from which the rest of the line can still be divided. Each set is a short list of intervals: one,
unless single items outweigh what some slow part may hold. `walk_forward` then picks cuts nearest
to wanted positions inside these sets.

A rank sees its stretch of the line: positions `first <= a < last`, with prefix sums from position
`base` on that reach a few items past `last`. Empty prefix sums stand for items of weight 1
(`total`) or for no limit (`limit`). What lies beyond `last` arrives as intervals with the sums at
their lower ends.

Source: the probe of A. Pinar, C. Aykanat, Fast optimal load balancing algorithms for 1D
partitioning, JPDC 64:974 (2004), run from the right on sets of positions instead of one position,
which keeps it exact when parts differ in speed and none may be empty.
Cost: O(P log n) a sweep, plus the items heavier than a part may hold.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.kernels._jit import jit

__all__ = ["caps", "pick", "sweep_back", "walk_forward"]


@jit
def caps(bottleneck: float, speed: FloatArray, most: int) -> Int64Array:
    """Return the largest weight w <= most of each part with float64(w) / speed <= bottleneck."""
    cap = np.empty(len(speed), np.int64)
    for p in range(len(speed)):
        if most / speed[p] <= bottleneck:
            cap[p] = most
            continue
        w = int(min(bottleneck * speed[p], 4.0e18))
        while w > 0 and w / speed[p] > bottleneck:
            w -= 1
        while (w + 1) / speed[p] <= bottleneck:
            w += 1
        cap[p] = min(w, most)
    return cap


@jit
def count_up_to(ascending: Int64Array, value: int) -> int:
    """Return how many entries are <= value (numpy's own search compiles for a second)."""
    low, high = 0, len(ascending)
    while low < high:
        middle = (low + high) >> 1
        if ascending[middle] <= value:
            low = middle + 1
        else:
            high = middle
    return low


@jit
def sum_before(prefix: Int64Array, at: int, base: int) -> int:
    """Return the sum of the items before a position; an empty prefix means 1 each."""
    return int(prefix[at - base]) if len(prefix) else int(at)


@jit
def limit_before(prefix: Int64Array, at: int, base: int) -> int:
    """Return the limited sum before a position; an empty prefix means there is no limit."""
    return int(prefix[at - base]) if len(prefix) else 0


@jit
def append_interval(own: Int64Array, fresh: int, n: int, low: int, high: int) -> int:
    """Append an interval below the last one, or extend that; return the new count, -1 if full."""
    if n > fresh and own[n - 1, 0] == high + 1:
        own[n - 1, 0] = low
        return n
    if n < 0 or n == len(own):
        return -1
    own[n, 0], own[n, 1] = low, high
    return n + 1


@jit
def take_least(
    left: int,
    right: int,
    p: int,
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    cap: Int64Array,
    limit_cap: Int64Array,
    speed: FloatArray,
    heavy: Int64Array,
    brackets: FloatArray,
    own: Int64Array,
    fresh: int,
    n: int,
) -> int:
    """Append the positions left..right whose chunk p may take exactly `least` items."""
    base, least = span[2], span[3]
    h = count_up_to(heavy, right) - 1
    while right >= left:
        blocked = left - 1
        while h >= 0 and heavy[h] >= left and blocked < left:
            a = heavy[h]
            h -= 1
            w = sum_before(total, a + least, base) - sum_before(total, a, base)
            v = limit_before(limit, a + least, base) - limit_before(limit, a, base)
            if w <= cap[p]:
                brackets[1] = max(brackets[1], w / speed[p])
            else:
                brackets[0] = min(brackets[0], w / speed[p])
            if w > cap[p] or v > limit_cap[p]:
                blocked = a
        if right > blocked:
            n = append_interval(own, fresh, n, blocked + 1, right)
        right = blocked - 1
    return n


@jit
def reach_back(
    low: int,
    top: int,
    p: int,
    ends: Int64Array,
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    cap: Int64Array,
    limit_cap: Int64Array,
    speed: FloatArray,
    brackets: FloatArray,
) -> int:
    """Return the lowest position of low..top from which chunk p reaches `ends`; top + 1 if none.

    `ends` is (position, position, total there, limit there).
    """
    base = span[2]
    a, stop = low, top + 1
    while a < stop:
        middle = (a + stop) >> 1
        if (
            ends[2] - sum_before(total, middle, base) <= cap[p]
            and ends[3] - limit_before(limit, middle, base) <= limit_cap[p]
        ):
            stop = middle
        else:
            a = middle + 1
    if a <= top:
        brackets[1] = max(brackets[1], (ends[2] - sum_before(total, a, base)) / speed[p])
    if a > low:
        w = ends[2] - sum_before(total, a - 1, base)
        if w > cap[p]:
            brackets[0] = min(brackets[0], w / speed[p])
    return a


@jit
def sweep_back(
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    cap: Int64Array,
    limit_cap: Int64Array,
    speed: FloatArray,
    heavy: Int64Array,
    came_ptr: Int64Array,
    came: Int64Array,
    brackets: FloatArray,
    own_ptr: Int64Array,
    own: Int64Array,
) -> int:
    """Find the positions of this stretch from which chunks p, p + 1, ... can end the line.

    Parameters
    ----------
    span : (4,) int64
        first, last, base, least (items a chunk takes at least).
    heavy : int64
        Positions whose next `least` items may be too much for some part, ascending.
    came_ptr (P + 2,), came (m, 4)
        For each p, intervals (low, high, total at low, limit at low) beyond `last`, ascending.
    brackets : (2,) float64, changed
        Smallest quotient above the bottleneck and largest below that a comparison met.
    own_ptr (P + 2,), own (capacity, 2), written
        Intervals for p = P, P - 1, ..., 0, each list descending.

    Returns
    -------
    int
        Number of intervals; -1 if `own` is too short.
    """
    first, least, n_parts = span[0], span[3], len(cap)
    ends = np.empty(4, np.int64)  # the interval of cut p + 1 at hand
    own_ptr[0] = 0
    own_ptr[1] = 0  # p = P: only the end of the line, which came
    n = int(own_ptr[0])  # a plain 0 would compile the callees once more
    for q in range(1, n_parts + 1):
        p = n_parts - q
        fresh = n
        top = span[1] - 1  # highest position not decided
        n_came = came_ptr[p + 2] - came_ptr[p + 1]
        n_all = n_came + own_ptr[q] - own_ptr[q - 1]
        for k in range(n_all):
            if top < first:
                break
            below = first
            if k < n_came:
                row = came_ptr[p + 2] - 1 - k
                for column in range(4):
                    ends[column] = came[row, column]
                if k + 1 < n_came:
                    below = max(first, came[row - 1, 1] - least + 1)
            else:
                row = own_ptr[q - 1] + k - n_came
                ends[0], ends[1] = own[row, 0], own[row, 1]
                ends[2] = sum_before(total, ends[0], span[2])
                ends[3] = limit_before(limit, ends[0], span[2])
            if n_came <= k + 1 < n_all:
                below = max(first, own[own_ptr[q - 1] + k + 1 - n_came, 1] - least + 1)
            # first the positions whose chunk ends inside the interval, `least` items on ...
            n = take_least(
                max(first, ends[0] - least), min(top, ends[1] - least), p, span,
                total, limit, cap, limit_cap, speed, heavy, brackets, own, fresh, n,
            )  # fmt: skip
            top = min(top, ends[0] - least - 1)
            # ... then those whose chunk must reach up to its lower end
            if top >= below:
                a = reach_back(
                    below, top, p, ends, span, total, limit, cap, limit_cap, speed, brackets
                )
                if a <= top:
                    n = append_interval(own, fresh, n, a, top)
                top = below - 1
            if n < 0:
                return -1
        own_ptr[q + 1] = n
    return n


@jit
def pass_on(
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    came_ptr: Int64Array,
    came: Int64Array,
    own_ptr: Int64Array,
    own: Int64Array,
    out_ptr: Int64Array,
    out: Int64Array,
) -> int:
    """Write what the stretch before needs: intervals up to `first + least`, and one more."""
    n_parts = len(out_ptr) - 2
    n = 0
    out_ptr[0] = 0
    for p in range(n_parts + 1):
        q = n_parts - p
        begin, end = own_ptr[q], own_ptr[q + 1]
        n_all = end - begin + came_ptr[p + 1] - came_ptr[p]
        for k in range(n_all):
            if k < end - begin:
                low, high = own[end - 1 - k, 0], own[end - 1 - k, 1]
                out[n, 0], out[n, 1] = low, high
                out[n, 2] = sum_before(total, low, span[2])
                out[n, 3] = limit_before(limit, low, span[2])
            else:
                for column in range(4):  # an assignment of rows would compile for seconds
                    out[n, column] = came[came_ptr[p] + k - (end - begin), column]
            n += 1
            if out[n - 1, 0] >= span[0] + span[3]:
                break
        out_ptr[p + 1] = n
    return n


@jit
def pick(
    p: int,
    origin: Int64Array,
    wanted: int,
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    cap: Int64Array,
    limit_cap: Int64Array,
    own_ptr: Int64Array,
    own: Int64Array,
) -> tuple[int, int]:
    """Return the best ends of chunk p on this stretch: last one <= wanted, first one above; or -1.

    `origin` is (begin of the chunk, total there, limit there).
    """
    q = len(cap) - (p + 1)
    first = int(origin[0] + span[3])
    base = int(span[2])
    above = -1
    for row in range(own_ptr[q], own_ptr[q + 1]):
        low, high = max(int(own[row, 0]), first), int(own[row, 1])
        if high < low:
            break
        if low <= wanted:
            a, stop = low - 1, min(high, wanted)  # the last position within reach
            while a < stop:
                middle = (a + stop + 1) >> 1
                if (
                    sum_before(total, middle, base) - origin[1] <= cap[p]
                    and limit_before(limit, middle, base) - origin[2] <= limit_cap[p]
                ):
                    a = middle
                else:
                    stop = middle - 1
            if a >= low:
                # a part of the same interval may lie above `wanted`; it is not nearer by our rule
                return a, above
        if high > wanted:
            above = max(low, wanted + 1)
    return -1, above


@jit
def walk_forward(
    p: int,
    origin: Int64Array,
    wanted: Int64Array,
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    cap: Int64Array,
    limit_cap: Int64Array,
    own_ptr: Int64Array,
    own: Int64Array,
    cut: Int64Array,
) -> int:
    """Pick the ends of chunks p, p + 1, ... until one may lie beyond this stretch; return it.

    `origin` and `cut` are changed; the last cut is not picked.
    """
    base, last = span[2], span[1]
    while p < len(cap) - 1:
        near, above = pick(
            p, origin, wanted[p + 1], span, total, limit, cap, limit_cap, own_ptr, own
        )
        ends_here = (
            wanted[p + 1] < last
            or sum_before(total, last, base) - origin[1] > cap[p]
            or limit_before(limit, last, base) - origin[2] > limit_cap[p]
        )
        chosen = near if near >= 0 else above
        if not ends_here or chosen < 0:
            break
        cut[p + 1] = chosen
        origin[0] = chosen
        origin[1] = sum_before(total, chosen, base)
        origin[2] = limit_before(limit, chosen, base)
        p += 1
    return p
