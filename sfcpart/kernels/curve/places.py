"""Passes over cells that know their place on a line: no sort, no gather, files read in order.

The line is looked at in blocks of 2**bits places. Empty weights mean 1 each, empty limits none.
Cells of one group share a place.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array, IntArray
from sfcpart.kernels._jit import jit

__all__ = ["NOWHERE", "add_places", "note_homes", "take_names"]

NOWHERE = 1 << 62
"""Lowest place of a home without cells."""


@jit
def note_homes(
    start: int,
    stop: int,
    place: IntArray,
    home: Int32Array,
    weight: Int64Array,
    limit: Int64Array,
    bits: int,
    n_homes: int,
    n_blocks: int,
) -> tuple[Int64Array, Int64Array, Int64Array]:
    """Return lowest place, highest place, weight of each home; block sums; heaviest cells."""
    ends = np.zeros((n_homes, 3), np.int64)
    for p in range(n_homes):
        ends[p, 0], ends[p, 1] = NOWHERE, -1
    sums = np.zeros((n_blocks, 2), np.int64)
    heaviest = np.zeros(2, np.int64)
    for i in range(start, stop):
        x, p = place[i], home[i]
        if x < ends[p, 0]:
            ends[p, 0] = x
        if x > ends[p, 1]:
            ends[p, 1] = x
        own = weight[i] if len(weight) else 1
        ends[p, 2] += own
        sums[x >> bits, 0] += own
        heaviest[0] = max(heaviest[0], own)
        if len(limit):
            sums[x >> bits, 1] += limit[i]
            heaviest[1] = max(heaviest[1], limit[i])
    return ends, sums, heaviest


@jit
def add_places(
    start: int,
    stop: int,
    place: IntArray,
    values: Int64Array,
    bits: int,
    first: Int64Array,
    out: Int64Array,
) -> None:
    """Add the values of cells to the rows of their places; block b begins at row `first[b]`.

    Blocks at -1 are left out. Threads may share the cells only if no two share a place.
    """
    inside = (1 << bits) - 1
    for i in range(start, stop):
        row = first[place[i] >> bits]
        if row >= 0:
            out[row + (place[i] & inside)] += values[i] if len(values) else 1


@jit
def take_names(
    start: int,
    stop: int,
    place: IntArray,
    cut: Int64Array,
    name: Int32Array,
    bits: int,
    chunk: Int32Array,
    part: Int32Array,
) -> None:
    """Give each cell the name of its chunk; `chunk` holds the chunk of each block, or -1 - chunk.

    The latter where the block's first place is in that chunk and later ones may be in the next.
    """
    for i in range(start, stop):
        c = chunk[place[i] >> bits]
        if c < 0:
            c = -1 - c
            while place[i] >= cut[c + 1]:
                c += 1
        part[i] = name[c]
