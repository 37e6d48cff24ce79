"""Match parts so that the largest of them moves as little as it can: a bottleneck assignment.

A part named l that becomes new part q sends what it holds and does not keep, and receives what q
holds and it has not: the larger is max(sent, received) - shared. The least largest value is among
those that single pairs have; bisection over them asks one maximum flow each whether all parts can
be matched by pairs of at most that value. Pairs that share nothing are not listed: light names and
light parts meet in a hub of their kind.

Source: bottleneck assignment by thresholds, common practice, no source; the aim is that of
L. Oliker, R. Biswas, JPDC 51 (1998), abstract read.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import Int64Array, IntArray

if TYPE_CHECKING:
    from scipy.sparse import csr_array

__all__ = ["match_least_largest"]


def match_least_largest(
    shared: csr_array, *, sent: Int64Array, received: Int64Array, kind: Int64Array
) -> Int64Array:
    """Return the row of each column; the largest max(sent, received) - shared is the least.

    Parameters
    ----------
    shared : (n, n) csr_array of int64
        Weight that name l and new part q share, of pairs of one kind only.
    sent, received : (n,) int64
        All that each name holds now, all that each new part will hold.
    kind : (n,) int64
        Rows and columns are matched within their kind.

    Examples
    --------
    >>> from scipy.sparse import csr_array
    >>> load = np.array([10, 10])
    >>> match_least_largest(
    ...     csr_array([[9, 4], [1, 6]]), sent=load, received=load, kind=np.zeros(2, np.int64)
    ... ).tolist()
    [0, 1]
    """
    problem = _Bottleneck.of(shared, sent, received, kind)
    values = np.unique(np.concatenate([problem.cost, sent, received]))
    low, high = 0, len(values) - 1  # the largest always does: every pair of a kind is allowed
    best = problem.matching(int(values[high]))
    while low < high:
        middle = (low + high) // 2
        found = problem.matching(int(values[middle]))
        if found is None:
            low = middle + 1
        else:
            best, high = found, middle
    assert best is not None
    return best


@dataclass(frozen=True, eq=False)
class _Bottleneck:
    """Pairs with what the worse of their sides moves; the rest is as in the call above."""

    row: Int64Array
    column: Int64Array
    cost: Int64Array
    sent: Int64Array
    received: Int64Array
    kind: Int64Array

    @classmethod
    def of(
        cls, shared: csr_array, sent: Int64Array, received: Int64Array, kind: Int64Array
    ) -> _Bottleneck:
        """Price the pairs."""
        row = np.repeat(np.arange(len(sent)), np.diff(shared.indptr))
        column = shared.indices.astype(np.int64)
        cost = np.maximum(sent[row], received[column]) - shared.data
        _, number = np.unique(kind, return_inverse=True)
        return cls(row, column, cost, sent, received, number.astype(np.int64))

    def matching(self, most: int) -> Int64Array | None:
        """Match all rows and columns with pairs of at most some value; None if there is no way."""
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import maximum_flow

        n, n_kinds = len(self.sent), int(self.kind.max(initial=0)) + 1
        source, sink, hub = 2 * n + n_kinds, 2 * n + n_kinds + 1, 2 * n
        every = np.arange(n)
        pair = np.flatnonzero(self.cost <= most)
        light_row = np.flatnonzero(self.sent <= most)
        light_column = np.flatnonzero(self.received <= most)
        begin = np.concatenate(
            [
                np.full(n, source),
                every + n,
                self.row[pair],
                light_row,
                hub + self.kind[light_column],
            ]
        )
        end = np.concatenate(
            [every, np.full(n, sink), n + self.column[pair], hub + self.kind[light_row],
             n + light_column]
        )  # fmt: skip
        ones = np.ones(len(begin), np.int32)
        network = coo_array((ones, (begin, end)), shape=(sink + 1, sink + 1)).tocsr()
        found = maximum_flow(network, source, sink)
        if found.flow_value < n:
            return None
        flow = found.flow.tocoo()
        return self._read(flow.row[flow.data > 0], flow.col[flow.data > 0])

    def _read(self, begin: IntArray, end: IntArray) -> Int64Array:
        """Read the matching off the flow; what went through a hub is paired ascending."""
        n = len(self.sent)
        match = np.full(n, -1, np.int64)
        direct = (begin < n) & (end >= n) & (end < 2 * n)
        match[end[direct] - n] = begin[direct]
        last_hub = 2 * n + int(self.kind.max(initial=0))
        for hub in range(2 * n, last_hub + 1):
            rows = np.sort(begin[(end == hub) & (begin < n)])
            columns = np.sort(end[(begin == hub) & (end >= n)]) - n
            match[columns] = rows
        return match
