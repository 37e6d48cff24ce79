"""Pairs that some best matching holds for certain, found before the rest is solved.

A pair that is the heaviest of both its row and its column, and weighs at least what the second
heaviest of both weigh together, can be exchanged into any matching without loss (elementary). What
remains is smaller, and may have such pairs again. Cost: O(pairs) a round.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array, BoolArray, Int64Array

__all__ = ["settle"]

_ROUNDS = 20


def settle(row: Int64Array, column: Int64Array, weight: Int64Array) -> tuple[Int64Array, BoolArray]:
    """Return the pairs that are settled and which others are still open.

    Parameters
    ----------
    row, column, weight : (n,) int64
        By row, then column; weights > 0.

    Returns
    -------
    settled : (k,) int64
        No two share a row or a column.
    is_open : (n,) bool
        Pairs whose row and column are not among these.

    Examples
    --------
    >>> rows, columns = np.array([0, 0, 1, 1]), np.array([0, 1, 0, 1])
    >>> settle(rows, columns, np.array([9, 2, 3, 1]))[0].tolist()
    [0, 3]
    """
    weight = weight.copy()
    by_column = np.argsort(column, kind="stable")
    lines = _Lines.of(row, np.arange(len(row))), _Lines.of(column, by_column)
    found = [np.empty(0, np.int64)]
    for _ in range(_ROUNDS):
        (best, second), (column_best, column_second) = (line.tops(weight) for line in lines)
        rival = second[lines[0].line] + column_second[lines[1].line]
        sure = np.intersect1d(best, column_best)
        sure = sure[weight[sure] >= rival[sure]]
        if not len(sure):
            break
        found.append(sure)
        for line in lines:
            weight[line.touched(sure)] = 0
    return np.concatenate(found), weight > 0


class _Lines:
    """The rows, or the columns, of a table of pairs."""

    def __init__(self, line: Int64Array, order: Int64Array, start: Int64Array) -> None:
        self.line, self.order, self.start = line, order, start

    @classmethod
    def of(cls, number: Int64Array, order: Int64Array) -> _Lines:
        """Number the lines that have pairs; `order` puts pairs in order of them."""
        _, line = np.unique(number, return_inverse=True)
        _, start = np.unique(line[order], return_index=True)
        return cls(line, order, start)

    def tops(self, weight: Int64Array) -> tuple[Int64Array, Int64Array]:
        """Return the heaviest pair of each line that has any left, and all second weights."""
        own = weight[self.order]
        top = np.maximum.reduceat(own, self.start)
        at = np.flatnonzero((own == top[self.line[self.order]]) & (own > 0))
        _, first = np.unique(self.line[self.order[at]], return_index=True)
        at = at[first]
        own[at] = 0
        return self.order[at], np.maximum.reduceat(own, self.start)

    def touched(self, pairs: Int64Array) -> Array:
        """Return which pairs are of the lines of some."""
        is_hit = np.zeros(len(self.start), np.bool_)
        is_hit[self.line[pairs]] = True
        return is_hit[self.line]
