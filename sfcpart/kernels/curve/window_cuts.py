"""Move cuts of a line inside windows to the least total cut: a sequential dynamic programme.

An edge between positions a < b is cut if some cut lies in (a, b]; it counts once, at the first
such cut. With C(c) the edges that span c and S(d, c) those that span d and c, chunk [d, c) adds
C(c) - S(d, c) for the edges that leave it forwards. Only differences to the first positions of
the windows are computed, which needs the rows of the items inside windows and no others.

Source: B. W. Kernighan, Optimal sequential partitions of graphs, J. ACM 18:34 (1971), from memory.
Cost: O(width^2) a window, O(1) memory a pair of positions for its backward pointer only.
"""

from __future__ import annotations

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.kernels._jit import jit

__all__ = ["cut_windows"]

_NEVER = 1 << 62


@jit
def cut_windows(
    low: Int64Array,
    high: Int64Array,
    plain: Int64Array,
    first_row: Int64Array,
    indptr: Int64Array,
    place: Int64Array,
    weight: Int64Array,
    sums: Int64Array,
    capacity: Int64Array,
    limit_sums: Int64Array,
    limit: Int64Array,
    cost: Int64Array,
    back: Int32Array,
    leaving: Int64Array,
    cut: Int64Array,
) -> None:
    """Choose one position of each window; `cut` gets them.

    Window j holds the positions low[j]..high[j] (the first and the last one position each) and
    lies after window j - 1. Position c of it has the sums of weights at first_row[j] + c - low[j],
    and so have the rows of the item after it in `indptr`; `place` and `weight` are the entries.
    `cost`, `back` (one a position) and `leaving` (the widest window) are room to work in.
    """
    cost[first_row[0]] = 0
    for j in range(1, len(low)):
        before, here = first_row[j - 1], first_row[j]
        lo, wide = low[j - 1], high[j - 1] - low[j - 1]
        for i in range(wide):  # edges of items of the window before that reach beyond low[j]
            leaving[i] = 0
            for e in range(indptr[before + i], indptr[before + i + 1]):
                if place[e] >= low[j]:
                    leaving[i] += weight[e]
        span, both, least = 0, 0, 0
        for k in range(high[j] - low[j] + 1):
            row = here + k
            if k > 0:  # the item before position low[j] + k changes sides
                item = low[j] + k - 1
                for e in range(indptr[row - 1], indptr[row]):
                    a = place[e]
                    span += weight[e] if a > item else -weight[e] if a < item else 0
                    if a < lo:
                        both -= weight[e]
                    elif a < lo + wide:
                        leaving[a - lo] -= weight[e]
            while least <= wide and (
                sums[row] - sums[before + least] > capacity[j - 1]
                or limit_sums[row] - limit_sums[before + least] > limit[j - 1]
            ):
                least += 1
            best, chosen, shared = _NEVER, -1, both
            for i in range(wide + 1):
                if i >= least and cost[before + i] < _NEVER:
                    found = cost[before + i] - shared
                    nearer = abs(lo + i - plain[j - 1]) < abs(lo + chosen - plain[j - 1])
                    if found < best or (found == best and nearer):
                        best, chosen = found, i
                if i < wide:
                    shared += leaving[i]
            cost[row] = best + span if chosen >= 0 else _NEVER
            back[row] = chosen
    at = 0
    for j in range(len(low) - 1, -1, -1):
        cut[j] = low[j] + at
        at = back[first_row[j] + at]
