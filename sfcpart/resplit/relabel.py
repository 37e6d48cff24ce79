"""Rename the parts of a new split so that most stays at home, or the largest mover moves least.

The overlap of old and new parts is a sparse table of weights; a name for each new part is an
assignment of its columns to its rows (L. Oliker, R. Biswas, JPDC 51 (1998), abstract read):

- "total": the most weight in all keeps its part. Every row gets a column of its own that stands
  for "none", so that scipy's sparse minimum-weight full matching applies to the sparse table.
- "busiest": the largest weight that any part sends or receives is as small as it can be: a
  bottleneck assignment, by bisection over the values it can have with one maximum flow each.

With nested levels blocks of names are matched as wholes first, by what the best names inside
would keep, so that the parts of a node stay together. Only parts of one kind (speed, limit) trade
names. Cost: a shortest path for each part over the pairs that overlap.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, Literal

import numpy as np

from sfcpart.dtypes import PART, Array, Int32Array, Int64Array
from sfcpart.resplit.bottleneck import match_least_largest
from sfcpart.resplit.overlap import Overlap
from sfcpart.resplit.settled import settle

if TYPE_CHECKING:
    from scipy.sparse import csr_array

__all__ = ["Keep", "best_labels"]

Keep = Literal["total", "busiest"]

_BITS = 40
"""Weights are compared to so many bits, which keeps the matching's float64 sums exact."""


def best_labels(
    overlap: Overlap,
    *,
    keep: Keep = "total",
    level_sizes: Sequence[int] = (),
    kind: Int64Array | None = None,
) -> Int32Array:
    """Return the best name of each new part.

    Parameters
    ----------
    overlap : Overlap
        Old parts beyond the number of new ones have no name any more; new names beyond the number
        of old parts are at home nowhere.
    keep : {"total", "busiest"}
        Keep the most weight in all at home, or let the part that moves most move least. The
        latter holds inside the blocks of nested levels; these are matched by "total".
    level_sizes : sequence of int
        Nested levels; their product is the number of new parts.
    kind : (n_parts,) int64, optional
        Parts trade names only with parts of the same number.

    Returns
    -------
    (n_parts,) int32
        New part q becomes `label[q]`: a permutation. Parts without a home take the names left
        over, both ascending.

    Examples
    --------
    >>> home, new = np.array([0, 0, 1, 1, 1], np.int32), np.array([1, 1, 0, 0, 1], np.int32)
    >>> best_labels(Overlap.of(home, new, n_old_parts=2, n_parts=2)).tolist()
    [1, 0]
    """
    n_parts = overlap.n_parts
    kinds = np.zeros(n_parts, np.int64) if kind is None else kind
    inside = overlap.old < n_parts
    known = kinds[overlap.new] == kinds[np.where(inside, overlap.old, 0)]
    use = inside & known & (overlap.weight > 0)
    pairs = _Pairs(
        overlap.old[use].astype(np.int64), overlap.new[use].astype(np.int64), overlap.weight[use]
    )
    sizes = tuple(level_sizes) or (n_parts,)
    if keep == "busiest":
        sent = np.zeros(n_parts, np.int64)
        np.add.at(sent, overlap.old[inside], overlap.weight[inside])
        received = np.zeros(n_parts, np.int64)
        np.add.at(received, overlap.new, overlap.weight)
        loads = _Loads(sent, received)
    else:
        loads = None
    match = _nested(pairs, sizes, kinds, loads)
    return np.asarray(match, PART)


@dataclass(frozen=True, eq=False)
class _Pairs:
    """Rows (names), columns (new parts) and the weight they share, by row, then column."""

    row: Int64Array
    column: Int64Array
    weight: Int64Array

    def only(self, rows: Int64Array, row0: int, column0: int) -> _Pairs:
        """Return some of the pairs, counted from a row and a column."""
        return _Pairs(self.row[rows] - row0, self.column[rows] - column0, self.weight[rows])

    def matrix(self, n: int) -> csr_array:
        """Return the (n, n) table."""
        from scipy.sparse import csr_array

        indptr = np.searchsorted(self.row, np.arange(n + 1))
        return csr_array((self.weight, self.column, indptr), shape=(n, n))


@dataclass(frozen=True, eq=False)
class _Loads:
    """All that each name holds now, and all that each new part will hold."""

    sent: Int64Array
    received: Int64Array

    def only(self, n: int, row0: int, column0: int) -> _Loads:
        """Return those of a block of names and a block of parts."""
        return _Loads(self.sent[row0 : row0 + n], self.received[column0 : column0 + n])


def _nested(
    pairs: _Pairs, sizes: tuple[int, ...], kinds: Int64Array, loads: _Loads | None
) -> Int64Array:
    """Return the name of each new part of a block, level by level."""
    n = len(kinds)
    if len(sizes) == 1:
        if loads is None:
            match = match_most(pairs.matrix(n))
        else:
            match = match_least_largest(
                pairs.matrix(n), sent=loads.sent, received=loads.received, kind=kinds
            )
        return _filled(match, kinds)
    inside = n // sizes[0]
    kinds_of = kinds.reshape(sizes[0], inside)
    _, outer_kind = np.unique(kinds_of, axis=0, return_inverse=True)
    outer_kind = outer_kind.reshape(-1).astype(np.int64)
    blocks = _block_pairs(pairs, inside, outer_kind)
    inner = {
        (a, b): _nested(
            pairs.only(rows, a * inside, b * inside),
            sizes[1:],
            kinds_of[b],
            None if loads is None else loads.only(inside, a * inside, b * inside),
        )
        for (a, b), rows in blocks.items()
    }
    kept = [
        _kept(pairs.only(rows, a * inside, b * inside), inner[a, b])
        for (a, b), rows in blocks.items()
    ]
    at = np.array(list(blocks), np.int64).reshape(-1, 2)
    outer = _Pairs(at[:, 0], at[:, 1], np.array(kept, np.int64))
    block_label = _filled(match_most(outer.matrix(sizes[0])), outer_kind)
    label = np.empty(n, np.int64)
    for b, a in enumerate(block_label.tolist()):
        names = inner.get((a, b), np.arange(inside))
        label[b * inside : (b + 1) * inside] = a * inside + names
    return label


def _block_pairs(pairs: _Pairs, inside: int, kind: Int64Array) -> dict[tuple[int, int], Int64Array]:
    """Group pairs by their blocks, those of one kind only, by row block, then column block."""
    a, b = pairs.row // inside, pairs.column // inside
    order = np.lexsort((pairs.column, pairs.row, b, a))
    order = order[kind[a[order]] == kind[b[order]]]
    key = a[order] * len(kind) + b[order]
    start = np.flatnonzero(np.append(True, key[1:] != key[:-1])) if len(key) else key
    edges = np.append(start, len(key))
    return {
        (int(a[order[lo]]), int(b[order[lo]])): order[lo:hi]
        for lo, hi in pairwise(edges.tolist())
        if hi > lo
    }


def _kept(pairs: _Pairs, label: Int64Array) -> int:
    """Return the weight that keeps its part under some names."""
    return int(pairs.weight[label[pairs.column] == pairs.row].sum())


def match_most(shared: csr_array) -> Int64Array:
    """Match rows to columns for the largest sum; return the row of each column, -1 for none.

    Examples
    --------
    >>> from scipy.sparse import csr_array
    >>> match_most(csr_array([[3, 2], [2, 0]])).tolist()
    [1, 0]
    """
    n_rows, n_columns = shared.shape
    match = np.full(n_columns, -1, np.int64)
    if shared.nnz == 0:
        return match
    row = np.repeat(np.arange(n_rows), np.diff(shared.indptr))
    column, weight = shared.indices.astype(np.int64), shared.data.astype(np.int64)
    settled, is_open = settle(row, column, weight)
    match[column[settled]] = row[settled]
    if is_open.any():
        rows, at = np.unique(row[is_open], return_inverse=True)
        pairs = _Pairs(at.astype(np.int64), column[is_open], weight[is_open])
        taken, columns = _full_matching(pairs, len(rows), n_columns)
        match[columns] = rows[taken]
    return match


def _full_matching(pairs: _Pairs, n_rows: int, n_columns: int) -> tuple[Int64Array, Int64Array]:
    """Return rows and columns of the matching with the largest sum; every row has a pair."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import min_weight_full_bipartite_matching

    weight = pairs.weight >> max(0, int(pairs.weight.max()).bit_length() - _BITS)
    none = float(weight.max()) + 1.0
    indptr = np.searchsorted(pairs.row, np.arange(n_rows + 1)) + np.arange(n_rows + 1)
    end_of_row = indptr[1:] - 1  # where each row's own column for "none" stands
    data = np.full(len(weight) + n_rows, none)
    indices = np.empty(len(data), np.int32)
    is_pair = np.ones(len(data), np.bool_)
    is_pair[end_of_row] = False
    data[is_pair] = none - weight
    indices[is_pair] = pairs.column
    indices[end_of_row] = n_columns + np.arange(n_rows)
    table = csr_array((data, indices, indptr), shape=(n_rows, n_columns + n_rows))
    rows, columns = min_weight_full_bipartite_matching(table)
    taken = columns < n_columns
    return rows[taken].astype(np.int64), columns[taken].astype(np.int64)


def _filled(match: Int64Array, kind: Int64Array) -> Int64Array:
    """Give columns without a row the rows left over of their kind, both ascending."""
    free: Array = np.ones(len(match), np.bool_)
    free[match[match >= 0]] = False
    label = match.copy()
    for each in np.unique(kind[match < 0]):
        columns = np.flatnonzero((match < 0) & (kind == each))
        label[columns] = np.flatnonzero(free & (kind == each))
    return label
