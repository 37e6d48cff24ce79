"""What each old part and each new part share: the one table behind moving and relabelling."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.dtypes import PART, Array, Int32Array, Int64Array
from sfcpart.kernels.pair_sums import pair_sums
from sfcpart.kernels.threads import run_ranges

if TYPE_CHECKING:
    from scipy.sparse import csr_array

    from sfcpart.comm.base import Comm

__all__ = ["Overlap"]

_BITS = 10
"""2**_BITS pairs are counted before the table grows."""


@dataclass(frozen=True, eq=False)
class Overlap:
    """Pairs of an old and a new part that share cells, by old part, then new part.

    Attributes
    ----------
    n_old_parts, n_parts : int
        Old parts (rows) and new parts (columns).
    old, new : (n_pairs,) int32
    cells : (n_pairs,) int64
        Cells that old part `old` holds and new part `new` gets.
    weight : (n_pairs,) int64
        Their weight.
    """

    n_old_parts: int
    n_parts: int
    old: Int32Array
    new: Int32Array
    cells: Int64Array
    weight: Int64Array

    @classmethod
    def of(
        cls,
        home_part: Int32Array,
        cell_part: Int32Array,
        *,
        n_old_parts: int,
        n_parts: int,
        weight: Int64Array | None = None,
        comm: Comm | None = None,
    ) -> Overlap:
        """Add up cells and weights of each pair over all ranks.

        Parameters
        ----------
        home_part, cell_part : (n_local,) int32
            Old and new part of each of this rank's cells.
        n_old_parts, n_parts : int
        weight : (n_local,) int64, optional
            Quantised (a total of at most 2**53); 1 each by default.
        comm : Comm, optional

        Notes
        -----
        O(n_local), and a sort of the pairs there are; ranks exchange theirs.

        Examples
        --------
        >>> home, new = np.array([0, 0, 1, 1], np.int32), np.array([0, 1, 1, 1], np.int32)
        >>> both = Overlap.of(home, new, n_old_parts=2, n_parts=2)
        >>> both.old.tolist(), both.new.tolist(), both.cells.tolist()
        ([0, 0, 1], [0, 1, 1], [1, 1, 2])
        """
        comm = comm or SerialComm()
        given = home_part, cell_part, np.empty(0, np.int64) if weight is None else weight
        found = run_ranges(
            pair_sums, len(cell_part), *given, np.int64(n_parts), _BITS, smallest=1 << 16
        )
        rows = np.concatenate(found)
        rows = np.concatenate(comm.allgather(rows[rows[:, 0] >= 0]))
        pair, inverse = np.unique(rows[:, 0], return_inverse=True)
        sums = np.zeros((len(pair), 2), np.int64)
        np.add.at(sums, inverse, rows[:, 1:])
        old, new = np.divmod(pair, n_parts)
        cells, weights = np.ascontiguousarray(sums.T)
        return cls(n_old_parts, n_parts, old.astype(PART), new.astype(PART), cells, weights)

    def matrix(self, values: Array) -> csr_array:
        """Return values of the pairs as a (n_old_parts, n_parts) matrix."""
        from scipy.sparse import csr_array

        indptr = np.searchsorted(self.old, np.arange(self.n_old_parts + 1))
        shape = (self.n_old_parts, self.n_parts)
        return csr_array((values, self.new, indptr), shape=shape)

    def renamed(self, label: Int32Array) -> Overlap:
        """Return the overlap after new part q became `label[q]`."""
        new = label[self.new]
        order = np.lexsort((new, self.old))
        return Overlap(
            self.n_old_parts,
            self.n_parts,
            self.old[order],
            new[order],
            self.cells[order],
            self.weight[order],
        )
