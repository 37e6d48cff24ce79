"""Count and weigh cells by pairs of parts, of which few of all possible ones occur.

A table of open addressing (linear probing) with room for a power of two of pairs; cells that
follow each other mostly have the same pair, which is looked for first. Common practice, no source.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.kernels._jit import jit

__all__ = ["pair_sums"]


@jit
def pair_sums(
    start: int,
    stop: int,
    first: Int32Array,
    second: Int32Array,
    weight: Int64Array,
    n_second: int,
    bits: int,
) -> Int64Array:
    """Return (key, cells, weight) of each slot, key = first n_second + second, -1 where unused.

    Empty weights mean 1 each. The table has 2**bits slots and doubles when it is half full.
    """
    table = np.zeros((1 << bits, 3), np.int64)
    table[:, 0] = -1
    used, slot = 0, 0
    for i in range(start, stop):
        key = first[i] * n_second + second[i]
        if table[slot, 0] != key:
            mask = len(table) - 1
            slot = (key ^ (key >> 17)) * 40503 & mask
            while table[slot, 0] != key and table[slot, 0] >= 0:
                slot = (slot + 1) & mask
            if table[slot, 0] < 0:
                table[slot, 0] = key
                used += 1
        table[slot, 1] += 1
        table[slot, 2] += weight[i] if len(weight) else 1
        if 2 * used > len(table):
            table = doubled(table)
            slot = 0
    return table


@jit
def doubled(table: Int64Array) -> Int64Array:
    """Return the table with twice as many slots."""
    wide = np.zeros((2 * len(table), 3), np.int64)
    wide[:, 0] = -1
    mask = len(wide) - 1
    for k in range(len(table)):
        key = table[k, 0]
        if key < 0:
            continue
        slot = (key ^ (key >> 17)) * 40503 & mask
        while wide[slot, 0] >= 0:
            slot = (slot + 1) & mask
        wide[slot, 0], wide[slot, 1], wide[slot, 2] = key, table[k, 1], table[k, 2]
    return wide
