"""Where the data of each cell is: the home part, on meshes that were refined or coarsened since.

A new cell is at home where its old cell is: the one its parent number names, or the one it was
merged from; of several merged cells, where most of them are (the lowest part of equal ones). Where
no number says so, the old cell with the nearest centre counts (a k-d tree, scipy).

Cost: O(n), O(n log n) for merged cells, O(n log n_old) for nearest ones.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import PART, Array, FloatArray, Int32Array, Int64Array
from sfcpart.errors import InputError, PartitionError
from sfcpart.partition import Partition

__all__ = ["home_parts"]


def home_parts(
    old: Partition,
    n_cells: int,
    *,
    parent: ArrayLike | None = None,
    merged_into: ArrayLike | None = None,
    old_centers: FloatArray | None = None,
    centers: FloatArray | None = None,
) -> Int32Array:
    """Return the part that holds each new cell, (n_cells,) int32.

    Parameters
    ----------
    old : Partition
        Of the old cells.
    n_cells : int
        New cells. Without any of what follows they are the old ones.
    parent : (n_cells,) integers, optional
        Old cell that each new one is, or is a child of; -1 where that is not known.
    merged_into : (n_old,) integers, optional
        New cell that each old one became a piece of; -1 for the others. It goes before `parent`.
    old_centers, centers : (n_old, dim), (n_cells, dim) float64, optional
        For cells that neither of these tells about.

    Raises
    ------
    PartitionError
        If the old partition is of another number of cells.
    InputError
        If a number is out of range, or nothing tells where a cell comes from.

    Examples
    --------
    Old cells 0 and 1 are halved, 2 and 3 become one:

    >>> old = Partition.from_array([0, 0, 1, 1])
    >>> home_parts(
    ...     old, 5, parent=[0, 0, 1, 1, -1], merged_into=[-1, -1, 4, 4]).tolist()
    [0, 0, 0, 0, 1]
    """
    if parent is None and merged_into is None and old_centers is None:
        if old.n_cells != n_cells:
            raise PartitionError(
                f"the old partition has {old.n_cells} cells, the mesh {n_cells}; give the parent "
                "of each cell, or the old mesh"
            )
        return old.cell_part
    home = np.full(n_cells, -1, np.int64)
    if parent is not None:
        number = _numbers(parent, n_cells, old.n_cells, "the parent of cell")
        home = np.where(number >= 0, old.cell_part[number], -1)
    if merged_into is not None:
        number = _numbers(merged_into, old.n_cells, n_cells, "what became of old cell")
        cell, part = _most_common(number, old.cell_part)
        home[cell] = part
    unknown = np.flatnonzero(home < 0)
    if len(unknown):
        home[unknown] = old.cell_part[_nearest(unknown, old.n_cells, old_centers, centers)]
    return home.astype(PART)


def _numbers(given: ArrayLike, count: int, bound: int, what: str) -> Int64Array:
    """Return `count` cell numbers below a bound, -1 for none."""
    array = np.asarray(given)
    if array.shape != (count,):
        raise InputError(f"{what}s has shape {array.shape}; wanted one number each, ({count},)")
    whole: Array = array
    if array.dtype.kind == "f":
        whole = np.where(np.isfinite(array), array, bound)
        bad = np.flatnonzero(whole != np.rint(whole))
        whole = whole.astype(np.int64)
        whole[bad] = bound
    elif array.dtype.kind not in "iu":
        raise InputError(f"{what}s is of type {array.dtype}; wanted whole numbers")
    wrong = np.flatnonzero((whole < -1) | (whole >= bound))
    if len(wrong):
        first = int(wrong[0])
        raise InputError(
            f"{what} {first} is {array[first]}; wanted numbers from 0 to {bound - 1}, or -1"
        )
    return whole.astype(np.int64)


def _most_common(number: Int64Array, part: Int32Array) -> tuple[Int64Array, Int64Array]:
    """Return each new cell that was merged, and the part that holds most of its pieces."""
    known = number >= 0
    pair, count = np.unique(
        np.stack([number[known], part[known].astype(np.int64)], axis=1), axis=0, return_counts=True
    )
    order = np.lexsort((pair[:, 1], -count, pair[:, 0]))
    cell = pair[order, 0]
    first = order[np.append(True, cell[1:] != cell[:-1])[: len(cell)]]
    return pair[first, 0], pair[first, 1]


def _nearest(
    cells: Int64Array, n_old: int, old_centers: FloatArray | None, centers: FloatArray | None
) -> Int64Array:
    """Return the old cell with the centre nearest to that of each of some new cells."""
    if old_centers is None or centers is None:
        raise InputError(
            f"nothing tells which old cell became cell {cells[0]}; give its parent or the old mesh"
        )
    if len(old_centers) != n_old:
        raise PartitionError(
            f"the old partition has {n_old} cells, the old mesh {len(old_centers)}; "
            "wanted one part for each cell"
        )
    if old_centers.shape[1] != centers.shape[1]:
        raise InputError(
            f"the old mesh has {old_centers.shape[1]} coordinates, the new one {centers.shape[1]}; "
            "wanted the same space"
        )
    from scipy.spatial import cKDTree

    _, nearest = cKDTree(old_centers).query(centers[cells], workers=-1)
    return np.asarray(nearest, np.int64)
