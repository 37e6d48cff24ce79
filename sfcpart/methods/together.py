"""Keep cells together: a group becomes one item at the place of its first member.

Cells come in curve order, each rank with its stretch. Group numbers are dealt out to ranks
(number modulo size), where members from all stretches are counted and weighed; no rank sees all
groups.

Cost: a sort of the group numbers on each stretch and two exchanges of one row a group.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import Array, BoolArray, Int64Array, IntArray

__all__ = ["Bundles", "number_items"]

_NONE = np.empty(0, np.int64)


def number_items(group: Int64Array) -> tuple[Int64Array, int]:
    """Number free cells and groups by their first cell; return the item of each and their count."""
    first = np.arange(len(group))
    grouped = np.flatnonzero(group >= 0)
    if len(grouped):
        _, where, inverse = np.unique(group[grouped], return_index=True, return_inverse=True)
        first[grouped] = grouped[where][inverse]
    number: Int64Array = np.cumsum(first == np.arange(len(group))) - 1
    return number[first], int(number[-1]) + 1 if len(number) else 0


@dataclass(frozen=True, eq=False)
class Bundles:
    """Which places of this rank's stretch are items of their own, and what they weigh.

    Attributes
    ----------
    comm : Comm
    item : (n_slice,) bool
        True for free cells and for the first member of each group.
    weight, limit_weight : (n_items,) int64, or None
        Summed over the group.
    name : (n_items,) int64
        Group of each item, -1 for free cells.
    """

    comm: Comm
    item: BoolArray
    weight: Int64Array | None
    limit_weight: Int64Array | None
    name: Int64Array
    _group: Int64Array
    _here: _Here

    @classmethod
    def of(
        cls,
        group: Int64Array,
        *,
        weight: Int64Array | None,
        limit_weight: Int64Array | None,
        comm: Comm,
    ) -> Bundles:
        """Bundle cells in curve order by group number (-1: free)."""
        here = _Here.of(group, comm)
        position = int(comm.exscan(np.array([len(group)], np.int64))[0]) + np.arange(len(group))
        ones = np.ones(len(group), np.int64)
        rows = np.stack(
            [
                here.reduce(position, np.minimum),
                here.reduce(ones if weight is None else weight, np.add),
                here.reduce(ones * 0 if limit_weight is None else limit_weight, np.add),
            ],
            axis=1,
        )
        summed = here.over_ranks(rows, (np.minimum, np.add, np.add))
        item = group < 0
        grouped = here.member
        item[grouped] = position[grouped] == summed[here.inverse, 0]
        weights = []
        for column, given in ((1, weight if weight is not None else ones), (2, limit_weight)):
            if given is not None:
                given = given.copy()
                given[grouped] = summed[here.inverse, column]
                given = given[item]
            weights.append(given)
        return cls(comm, item, weights[0], weights[1], group[item], group, here)

    def spread(self, item_part: IntArray) -> IntArray:
        """Give every cell of the stretch the part of its item."""
        part = np.full(len(self.item), -1, item_part.dtype)
        part[self.item] = item_part
        known = self._here.reduce(part.astype(np.int64), np.maximum)
        known = self._here.over_ranks(known[:, None], (np.maximum,))[:, 0]
        part[self._here.member] = known[self._here.inverse]
        return part


@dataclass(frozen=True, eq=False)
class _Here:
    """The groups that have members on this rank, and the ranks that sum them."""

    comm: Comm
    member: Int64Array
    number: Int64Array
    inverse: Int64Array

    @classmethod
    def of(cls, group: Int64Array, comm: Comm) -> _Here:
        """Find the groups, ordered by the rank that sums them."""
        member = np.flatnonzero(group >= 0)
        number, inverse = np.unique(group[member], return_inverse=True)
        order = np.argsort(number % comm.size, kind="stable")
        place = np.empty_like(order)
        place[order] = np.arange(len(order))
        return cls(comm, member, number[order], place[inverse])

    def reduce(self, values: Int64Array, combine: np.ufunc) -> Int64Array:
        """Combine values of cells by group on this rank."""
        if not len(self.member):
            return _NONE
        order = np.argsort(self.inverse, kind="stable")
        start = np.searchsorted(self.inverse[order], np.arange(len(self.number)))
        return np.asarray(combine.reduceat(values[self.member][order], start))

    def over_ranks(self, rows: Array, combine: tuple[np.ufunc, ...]) -> Array:
        """Combine (n_groups, k) rows over all ranks, each column with its ufunc."""
        count = np.bincount(self.number % self.comm.size, minlength=self.comm.size)
        edge = np.concatenate(([0], np.cumsum(count)))
        table = np.column_stack([self.number, rows.reshape(len(self.number), len(combine))])
        sent = [table[a:b] for a, b in pairwise(edge)]
        came = self.comm.alltoall(sent)
        everything = np.concatenate(came)
        number, inverse = np.unique(everything[:, 0], return_inverse=True)
        order = np.argsort(inverse, kind="stable")
        start = np.searchsorted(inverse[order], np.arange(len(number)))
        summed = np.empty((len(number), len(combine)), np.int64)
        for column, ufunc in enumerate(combine if len(number) else ()):
            summed[:, column] = ufunc.reduceat(everything[order, column + 1], start)
        stop = np.cumsum([len(rows) for rows in came])
        answers = [summed[inverse[b - len(rows) : b]] for rows, b in zip(came, stop, strict=True)]
        return np.concatenate(self.comm.alltoall(answers))
