"""Cut a line of items into contiguous chunks under a bottleneck: sweep back, then walk forward.

A cut is a position between items; chunk p takes the items from cut p to cut p + 1. Given the
most each chunk may hold, `sweep_back` finds, chunk by chunk from the last, the set of positions
from which the rest of the line can still be divided. Each set is a short list of intervals: one,
unless single items outweigh what some slow part may hold. `walk_forward` then picks cuts nearest
to wanted positions inside these sets.

A rank sees its stretch of the line: positions `first <= a < last`, with prefix sums from position
`base` on that reach a few items past `last`. Empty prefix sums stand for items of weight 1
(`total`) or for no limit (`limit`). What lies beyond `last` arrives as intervals with the sums at
their lower ends; only those travel that a chunk from further down can reach, so that neither they
nor the work on a stretch grow with the number of parts elsewhere.

Source: the probe of A. Pinar, C. Aykanat, Fast optimal load balancing algorithms for 1D
partitioning, JPDC 64:974 (2004), run from the right on sets of positions instead of one position,
which keeps it exact when parts differ in speed and none may be empty.
Cost: O(log n) for each cut that can lie on the stretch, plus the items heavier than a part may
hold.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.kernels._jit import jit

__all__ = ["caps", "pass_on", "pick", "sweep_back", "walk_forward"]


@jit
def cap_of(bottleneck: float, speed: float, most: int) -> int:
    """Return the largest weight w <= most with float64(w) / speed <= bottleneck."""
    if most / speed <= bottleneck:
        return most
    w = int(min(bottleneck * speed, 4.0e18))
    while w > 0 and w / speed > bottleneck:
        w -= 1
    while (w + 1) / speed <= bottleneck:
        w += 1
    return min(w, most)


@jit
def caps(bottleneck: float, speed: FloatArray, most: int) -> Int64Array:
    """Return the largest weight w <= most of each part with float64(w) / speed <= bottleneck."""
    cap = np.empty(len(speed), np.int64)
    for p in range(len(speed)):
        cap[p] = cap_of(bottleneck, speed[p], most)
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
    bottleneck: float,
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
    cap = cap_of(bottleneck, speed[p], span[5])
    h = count_up_to(heavy, right) - 1
    while right >= left:
        blocked = left - 1
        while h >= 0 and heavy[h] >= left and blocked < left:
            a = heavy[h]
            h -= 1
            w = sum_before(total, a + least, base) - sum_before(total, a, base)
            v = limit_before(limit, a + least, base) - limit_before(limit, a, base)
            if w <= cap:
                brackets[1] = max(brackets[1], w / speed[p])
            else:
                brackets[0] = min(brackets[0], w / speed[p])
            if w > cap or v > limit_cap[p]:
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
    bottleneck: float,
    limit_cap: Int64Array,
    speed: FloatArray,
    brackets: FloatArray,
) -> int:
    """Return the lowest position of low..top from which chunk p reaches `ends`; top + 1 if none.

    `ends` is (position, position, total there, limit there).
    """
    base, cap = span[2], cap_of(bottleneck, speed[p], span[5])
    a, stop = low, top + 1
    while a < stop:
        middle = (a + stop) >> 1
        if (
            ends[2] - sum_before(total, middle, base) <= cap
            and ends[3] - limit_before(limit, middle, base) <= limit_cap[p]
        ):
            stop = middle
        else:
            a = middle + 1
    if a <= top:
        brackets[1] = max(brackets[1], (ends[2] - sum_before(total, a, base)) / speed[p])
    if a > low:
        w = ends[2] - sum_before(total, a - 1, base)
        if w > cap:
            brackets[0] = min(brackets[0], w / speed[p])
    return a


@jit
def last_within(
    span: Int64Array, total: Int64Array, limit: Int64Array, most: int, most_limited: int
) -> int:
    """Return the last position of a stretch with no more than some sums before it; -1 if none."""
    a, stop = int(span[0]) - 1, int(span[1]) - 1
    while a < stop:
        middle = (a + stop + 1) >> 1
        if (
            sum_before(total, middle, span[2]) <= most
            and limit_before(limit, middle, span[2]) <= most_limited
        ):
            a = middle
        else:
            stop = middle - 1
    return a if a >= span[0] else -1


@jit
def sweep_back(
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    bottleneck: float,
    limit_cap: Int64Array,
    speed: FloatArray,
    heavy: Int64Array,
    speed_sums: FloatArray,
    limit_sums: Int64Array,
    beyond: float,
    came: Int64Array,
    brackets: FloatArray,
    own_ptr: Int64Array,
    own: Int64Array,
) -> int:
    """Find the positions of this stretch from which chunks p, p + 1, ... can end the line.

    But for the stretch where the range begins, only those that the chunks before can reach.

    Parameters
    ----------
    span : (7,) int64
        first, last, base, least (items a chunk takes at least), begin of the range, its weight
        (at least 1), weight before it.
    heavy : int64
        Positions whose next `least` items may be too much for some part, ascending.
    speed_sums : (P + 1,) float64
        Speeds of the chunks before each cut.
    limit_sums : (P + 1,) int64
        The most limited weight before each cut, counted from the begin of the line.
    beyond : float
        The least quotient above the bottleneck that any chunk may have.
    came : (m, 5) int64
        Intervals beyond `last`: cut, low, high, total at low, limit at low; by cut, then place.
    brackets : (2,) float64, changed
        Smallest quotient above the bottleneck and largest below that a comparison met.
    own_ptr : (P + 2,) int64, zeros, written
        Intervals of cut c are `own[own_ptr[P - c] : own_ptr[P - c + 1]]`, descending. Cuts that
        cannot lie on this stretch are not looked at: their entries stay zero.
    own : (capacity, 3) int64, written
        Low, high, cut.

    Returns
    -------
    int
        Number of intervals; -1 if `own` is too short.
    """
    first, least, n_parts = span[0], span[3], len(speed)
    is_last = first <= span[4]
    ends = np.empty(4, np.int64)  # the interval of cut p + 1 at hand
    n = int(own_ptr[0])  # a plain 0 would compile the callees once more
    after = len(came)  # rows from here on belong to later cuts
    if after == 0:
        return n
    p = int(came[after - 1, 0])
    while p > 0:
        p -= 1
        q = n_parts - p
        start = after
        while start > 0 and came[start - 1, 0] == p + 1:
            start -= 1
        n_came = after - start
        n_all = n_came + own_ptr[q] - own_ptr[q - 1]
        if n_all == 0 and start == 0:
            break
        fresh = n
        top = span[1] - 1  # highest position not decided
        if not is_last:
            # rounded up: a little too much does no harm
            most = min(bottleneck * speed_sums[p] * (1 + 1e-9) + 1, float(span[5]))
            top = last_within(span, total, limit, span[6] + int(most), limit_sums[p])
            if top < span[1] - 1:
                brackets[0] = min(brackets[0], beyond)
            if top < first:
                break  # nor can the cuts before it lie here
        for k in range(n_all):
            if top < first:
                break
            below = first
            if k < n_came:
                row = after - 1 - k
                for column in range(4):
                    ends[column] = came[row, column + 1]
                if k + 1 < n_came:
                    below = max(first, came[row - 1, 2] - least + 1)
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
                total, limit, bottleneck, limit_cap, speed, heavy, brackets, own, fresh, n,
            )  # fmt: skip
            top = min(top, ends[0] - least - 1)
            # ... then those whose chunk must reach up to its lower end
            if top >= below:
                a = reach_back(
                    below, top, p, ends, span, total, limit, bottleneck, limit_cap, speed, brackets
                )
                if a <= top:
                    n = append_interval(own, fresh, n, a, top)
                top = below - 1
            if n < 0:
                return -1
        own_ptr[q + 1] = n
        for row in range(fresh, n):
            own[row, 2] = p
        after = start
    return n


@jit
def pass_on(
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    bottleneck: float,
    limit_cap: Int64Array,
    speed: FloatArray,
    came: Int64Array,
    own: Int64Array,
    n_own: int,
    brackets: FloatArray,
    out: Int64Array,
) -> int:
    """Write what the stretch before needs: intervals that a chunk from there can reach.

    Of each cut, those up to `first + least` and one more, unless the items between are too much
    for the chunk. The next larger bottleneck is then that of these items at most (`brackets`, which
    may name one that no chunk has: it is tried like any other). Returns the number of rows.
    """
    first, least = span[0], span[3]
    is_last = first <= span[4]  # nothing before needs anything but the answer
    total_here = sum_before(total, first, span[2])
    limit_here = limit_before(limit, first, span[2])
    row = np.empty(5, np.int64)
    n, k, i, group, is_done = 0, 0, n_own - 1, -1, False
    while k < len(came) or i >= 0:
        if i >= 0 and (k == len(came) or own[i, 2] <= came[k, 0]):  # own ones lie lower
            row[0], row[1], row[2] = own[i, 2], own[i, 0], own[i, 1]
            row[3] = sum_before(total, row[1], span[2])
            row[4] = limit_before(limit, row[1], span[2])
            i -= 1
        else:
            for column in range(5):  # an assignment of rows would compile for seconds
                row[column] = came[k, column]
            k += 1
        c = row[0]
        if c != group:
            group, is_done = c, False
        if c == 0 or is_last:
            is_done = c > 0 or not is_last or row[1] != first
        if is_done:
            continue
        if c > 0:
            w = row[3] - total_here
            cap = cap_of(bottleneck, speed[c - 1], span[5])
            if w > cap:
                brackets[0] = min(brackets[0], w / speed[c - 1])
            is_done = w > cap or row[4] - limit_here > limit_cap[c - 1]
            if is_done:
                continue
            is_done = row[1] >= first + least
        for column in range(5):
            out[n, column] = row[column]
        n += 1
    return n


@jit
def pick(
    p: int,
    origin: Int64Array,
    wanted: int,
    span: Int64Array,
    total: Int64Array,
    limit: Int64Array,
    bottleneck: float,
    limit_cap: Int64Array,
    speed: FloatArray,
    own_ptr: Int64Array,
    own: Int64Array,
) -> tuple[int, int]:
    """Return the best ends of chunk p on this stretch: last one <= wanted, first one above; or -1.

    `origin` is (begin of the chunk, total there, limit there).
    """
    q = len(speed) - (p + 1)
    cap = cap_of(bottleneck, speed[p], span[5])
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
                    sum_before(total, middle, base) - origin[1] <= cap
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
    bottleneck: float,
    limit_cap: Int64Array,
    speed: FloatArray,
    own_ptr: Int64Array,
    own: Int64Array,
    cut: Int64Array,
) -> int:
    """Pick the ends of chunks p, p + 1, ... until one may lie beyond this stretch; return it.

    `origin` and `cut` are changed; the last cut is not picked.
    """
    base, last = span[2], span[1]
    while p < len(speed) - 1:
        near, above = pick(
            p, origin, wanted[p + 1], span, total, limit, bottleneck, limit_cap, speed, own_ptr, own
        )
        ends_here = (
            wanted[p + 1] < last
            or sum_before(total, last, base) - origin[1] > cap_of(bottleneck, speed[p], span[5])
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
