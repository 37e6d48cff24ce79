"""The frozen result: which part each cell belongs to. It does not know how it was made."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import PART, Array, Int32Array, Int64Array
from sfcpart.errors import PartitionError

if TYPE_CHECKING:
    from scipy.sparse import csr_array

__all__ = ["Change", "Partition"]

_MANY, _MANY_A_CELL = 1_000_000, 10  # more parts than this are a slip, such as a field of ids


@dataclass(frozen=True)
class Change:
    """What differs between two partitions of the same cells.

    Attributes
    ----------
    n_moved : int
        Cells whose part is another.
    first_moved : int
        The lowest of them, -1 if there is none.
    moved_share : float
        Their share of the weight (of the cells without weights), 0 to 1.
    n_moved_relabelled : int
        Cells that would still differ if the parts of the other were renamed to fit best: what
        differs but for names.
    """

    n_moved: int
    first_moved: int
    moved_share: float
    n_moved_relabelled: int


@dataclass(frozen=True, eq=False)
class Partition:
    """Part of every cell, in the mesh's own cell order.

    Attributes
    ----------
    cell_part : (n_cells,) int32, read-only
        Part of each cell, 0 <= part < n_parts.
    n_parts : int
        Number of parts; a part may be empty only if there are more parts than cells.

    Examples
    --------
    >>> partition = Partition.from_array([0, 0, 1, 1, 2])
    >>> partition.n_parts, partition.part_size().tolist()
    (3, [2, 2, 1])
    """

    cell_part: Int32Array
    n_parts: int

    @classmethod
    def from_array(cls, cell_part: ArrayLike, n_parts: int | None = None) -> Partition:
        """Check and freeze an array of parts.

        Parameters
        ----------
        cell_part : (n_cells,) integers
            Part of each cell; not modified, copied unless it is already int32 and read-only.
        n_parts : int, optional
            Number of parts; by default one more than the largest part.

        Returns
        -------
        Partition

        Raises
        ------
        PartitionError
            If the array is not one row of integers, a part is out of range, or parts are numbered
            far beyond the cells and `n_parts` does not say that this is meant.

        Examples
        --------
        >>> Partition.from_array([0, 3, 1], 5).part_size().tolist()
        [1, 1, 0, 1, 0]
        """
        array = np.asarray(cell_part)
        if array.ndim != 1:
            raise PartitionError(
                f"cell_part has shape {array.shape}; wanted one integer a cell, (n_cells,)"
            )
        if array.dtype.kind not in "iu":
            array = _whole_numbers(array)
        highest = int(array.max()) if len(array) else -1  # unsigned dtypes have no -1
        count = highest + 1 if n_parts is None else int(n_parts)
        if n_parts is None and highest < 0 and len(array):
            count = 1  # all are negative, which is what is said below
        if count < 1:
            raise PartitionError(f"n_parts is {count}; wanted at least 1")
        if highest >= count or int(array.min(initial=0)) < 0:
            bad = int(np.flatnonzero((array < 0) | (array >= count))[0])
            raise PartitionError(
                f"cell {bad} is in part {array[bad]}; parts go from 0 to {count - 1}"
            )
        if n_parts is None and count > max(_MANY, _MANY_A_CELL * len(array)):
            raise PartitionError(
                f"cell {int(array.argmax())} of {len(array)} is in part {highest}; number the "
                "parts from 0 without gaps, or state n_parts"
            )
        if count > np.iinfo(PART).max:
            raise PartitionError(f"n_parts is {count}; at most {np.iinfo(PART).max} can be held")
        if array.dtype != PART or array.flags.writeable:
            array = array.astype(PART)
            array.flags.writeable = False
        return cls(cell_part=array, n_parts=count)

    @property
    def n_cells(self) -> int:
        """Number of cells."""
        return len(self.cell_part)

    def part_size(self) -> Int64Array:
        """Return the number of cells of each part, (n_parts,) int64.

        Examples
        --------
        >>> Partition.from_array([0, 2, 2], 4).part_size().tolist()
        [1, 0, 2, 0]
        """
        return np.bincount(self.cell_part, minlength=self.n_parts).astype(np.int64)

    def relabel(self, new_label: ArrayLike) -> Partition:
        """Rename parts: part p becomes `new_label[p]`.

        Parameters
        ----------
        new_label : (n_parts,) integers
            A permutation of 0..n_parts-1.

        Returns
        -------
        Partition

        Raises
        ------
        PartitionError
            If `new_label` is not a permutation of the parts.

        Examples
        --------
        >>> Partition.from_array([0, 0, 1, 2]).relabel([2, 0, 1]).cell_part.tolist()
        [2, 2, 0, 1]
        """
        label = np.asarray(new_label)
        if label.shape != (self.n_parts,) or not np.array_equal(
            np.sort(label), np.arange(self.n_parts)
        ):
            raise PartitionError(
                f"new_label is no permutation of 0..{self.n_parts - 1}: every part needs one label"
            )
        return Partition.from_array(label.astype(PART)[self.cell_part], self.n_parts)

    def equals(self, other: Partition) -> bool:
        """Tell whether two partitions agree cell by cell and in their number of parts.

        Parameters
        ----------
        other : Partition

        Returns
        -------
        bool

        Examples
        --------
        >>> one = Partition.from_array([0, 1])
        >>> one.equals(Partition.from_array([0, 1])), one.equals(Partition.from_array([0, 1], 3))
        (True, False)
        """
        return self.n_parts == other.n_parts and np.array_equal(self.cell_part, other.cell_part)

    def compare(self, other: Partition, weights: ArrayLike | None = None) -> Change:
        """Tell what differs between this partition and another of the same cells.

        Parameters
        ----------
        other : Partition
        weights : (n_cells,) numbers, optional
            Weight of each cell; 1 by default.

        Returns
        -------
        Change

        Raises
        ------
        PartitionError
            If the two do not divide the same number of cells.

        Notes
        -----
        O(n_cells) and an assignment of parts to parts (scipy's minimum-weight full matching of
        the overlap; H. W. Kuhn, Naval Research Logistics Quarterly 2, 83 (1955)).

        Examples
        --------
        >>> one = Partition.from_array([0, 0, 1, 1])
        >>> one.compare(Partition.from_array([1, 1, 0, 1]))
        Change(n_moved=3, first_moved=0, moved_share=0.75, n_moved_relabelled=1)
        """
        shared = self.overlap(other)
        moved = np.flatnonzero(self.cell_part != other.cell_part)
        weight = np.ones(self.n_cells) if weights is None else np.asarray(weights)
        total = weight.sum()
        return Change(
            n_moved=len(moved),
            first_moved=int(moved[0]) if len(moved) else -1,
            moved_share=float(weight[moved].sum() / total) if total else 0.0,
            n_moved_relabelled=self.n_cells - _most_kept(shared),
        )

    def overlap(self, other: Partition, weights: ArrayLike | None = None) -> csr_array:
        """Return the weight that part p of this and part q of the other share.

        Parameters
        ----------
        other : Partition
            A partition of the same cells.
        weights : (n_cells,) numbers, optional
            Weight of each cell; 1 by default.

        Returns
        -------
        scipy.sparse.csr_array
            (n_parts, other.n_parts), int64 counts or sums of weights.

        Raises
        ------
        PartitionError
            If the two do not divide the same number of cells.

        Examples
        --------
        >>> one = Partition.from_array([0, 0, 1, 1])
        >>> one.overlap(Partition.from_array([1, 1, 0, 1])).toarray().tolist()
        [[0, 2], [1, 1]]
        """
        from scipy.sparse import coo_array

        if self.n_cells != other.n_cells:
            raise PartitionError(
                f"the partitions have {self.n_cells} and {other.n_cells} cells; "
                "wanted the same mesh"
            )
        weight = np.ones(self.n_cells, np.int64) if weights is None else np.asarray(weights)
        shape = (self.n_parts, other.n_parts)
        return coo_array((weight, (self.cell_part, other.cell_part)), shape=shape).tocsr()


def _most_kept(shared: csr_array) -> int:
    """Return the most cells that can keep their part under any renaming of the parts.

    Blocks of parts that share cells with one another are matched each by itself, which keeps the
    tables small where partitions resemble each other.
    """
    from scipy.optimize import linear_sum_assignment
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    n_rows, both, n_all = shared.shape[0], shared.tocoo(), sum(shared.shape)
    links = coo_array((both.data, (both.row, n_rows + both.col)), shape=(n_all, n_all))
    _, block = connected_components(links, directed=False)
    row_block, column_block = block[:n_rows], block[n_rows:]
    kept = 0
    for each in np.unique(row_block):
        rows, columns = np.flatnonzero(row_block == each), np.flatnonzero(column_block == each)
        table = shared[rows][:, columns].toarray()
        kept += int(table[linear_sum_assignment(table, maximize=True)].sum())
    return kept


def _whole_numbers(array: Array) -> Array:
    """Accept floats that are whole numbers (a field read from a file); refuse the rest."""
    if array.dtype.kind != "f":
        raise PartitionError(f"cell_part holds {array.dtype} values; wanted whole numbers")
    odd = ~np.isfinite(array) | (np.abs(array) > 2.0**53) | (array != np.rint(array))
    if odd.any():
        cell = int(np.argmax(odd))
        raise PartitionError(f"cell {cell} is in part {array[cell]}; wanted whole numbers")
    return array.astype(np.int64)
