"""Join neighbouring cells of one part: union by lowest cell, paths halved.

`join_inside` joins cells within ranges, `join_across` the rest; cells beyond the rows (ghosts) are
left out. Cost: linear in cells plus entries of the cell graph, but for the inverse Ackermann
function (R. E. Tarjan, Efficiency of a good but not linear set union algorithm, Journal of the ACM
22 (1975); from memory).
"""

from __future__ import annotations

from sfcpart.dtypes import Int32Array, Int64Array, IntArray
from sfcpart.kernels._jit import jit

__all__ = ["count_joined", "join_across", "join_inside"]


@jit
def join_inside(
    start: int,
    stop: int,
    indptr: Int64Array,
    indices: IntArray,
    cell_part: Int32Array,
    parent: Int32Array,
) -> None:
    """Join neighbours of one part that both lie in the range (union by lowest cell, halving)."""
    for i in range(start, stop):
        parent[i] = i
        part = cell_part[i]
        a = i
        for entry in range(indptr[i], indptr[i + 1]):
            j = indices[entry]
            if j < start or j >= i or cell_part[j] != part:
                continue
            b = parent[j]
            while parent[b] != b:
                parent[b] = parent[parent[b]]
                b = parent[b]
            if b < a:
                parent[a] = b
                a = b
            elif a < b:
                parent[b] = a


@jit
def join_across(
    range_starts: Int64Array,
    indptr: Int64Array,
    indices: IntArray,
    cell_part: Int32Array,
    parent: Int32Array,
) -> None:
    """Join neighbours of one part that lie in different ranges (the last range ends the list)."""
    for r in range(1, len(range_starts) - 1):
        start = range_starts[r]
        for i in range(start, range_starts[r + 1]):
            part = cell_part[i]
            for entry in range(indptr[i], indptr[i + 1]):
                j = indices[entry]
                if j >= start or cell_part[j] != part:
                    continue
                a = parent[i]
                while parent[a] != a:
                    parent[a] = parent[parent[a]]
                    a = parent[a]
                b = parent[j]
                while parent[b] != b:
                    parent[b] = parent[parent[b]]
                    b = parent[b]
                if a < b:
                    parent[b] = a
                elif b < a:
                    parent[a] = b


@jit
def count_joined(parent: Int32Array, size: Int32Array) -> None:
    """Make every parent the root, which is the lowest cell; `size` counts the cells of each."""
    for i in range(len(parent)):
        # Parents have lower numbers, so that the parent's own root is already final.
        root = parent[parent[i]]
        parent[i] = root
        size[root] += 1
