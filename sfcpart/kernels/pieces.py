"""Renumber what each part uses: points of its cells, faces of its polyhedra, points of its faces.

How: one array remembers the local number of every item. Parts are visited in ascending order
and number from a base that grows, so a number below the base of a part is an old one and the
array is filled only once a call.
Cost: O(entries of the rows), one pass.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Int64Array, IntArray
from sfcpart.kernels._jit import jit

__all__ = ["number_locally"]


@jit
def number_locally(
    start: int,
    stop: int,
    row_indptr: Int64Array,
    rows: IntArray,
    indptr: Int64Array,
    indices: IntArray,
    n_items: int,
    seed_indptr: Int64Array,
    seed: IntArray,
    entry_indptr: Int64Array,
    entries: IntArray,
    offsets: IntArray,
    used: IntArray,
    used_count: Int64Array,
) -> None:
    """Write rows of a CSR relation with item numbers local to each part.

    Part k takes the rows `rows[row_indptr[k]:row_indptr[k + 1]]`, in order, of the relation
    (`indptr`, `indices`). Items are numbered by first use after those of
    `seed[seed_indptr[k]:...]`. Local numbers go to `entries` from `entry_indptr[k]`, offsets
    within the part to `offsets` from `row_indptr[k] + k`, new items to `used` from
    `entry_indptr[k]` and their number to `used_count[k]`.
    """
    known = np.full(n_items, -1, entries.dtype)
    for k in range(start, stop):
        first = entry_indptr[k]
        base = first + seed_indptr[k]
        n_seed = seed_indptr[k + 1] - seed_indptr[k]
        for s in range(n_seed):
            known[seed[seed_indptr[k] + s]] = base + s
        n_used = 0
        at = first
        shift = row_indptr[k] + k
        offsets[shift] = 0
        for r in range(row_indptr[k], row_indptr[k + 1]):
            row = rows[r]
            for e in range(indptr[row], indptr[row + 1]):
                item = indices[e]
                number = known[item]
                if number < base:
                    number = base + n_seed + n_used
                    known[item] = number
                    used[first + n_used] = item
                    n_used += 1
                entries[at] = number - base
                at += 1
            offsets[r + k + 1] = at - first
        used_count[k] = n_used
