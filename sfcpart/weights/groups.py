"""Cells that must stay together, as one group number a cell: -1 is free.

Groups come from a field (equal values), from pairs of cells, and from two boundary groups that are
copies of each other shifted by a constant (`periodic`). `join_groups` unites several: cells that
any of them holds together stay together.

Over ranks each holds the numbers of its slice of the cells. Values and group numbers meet at a
rank that their bits choose, cells that hang together are found by `sfcpart.slices.linking`. No
rank holds more than its cells, and the values and pairs that fall to it.
"""

from __future__ import annotations

import zlib

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.dtypes import GID, Array, Int64Array
from sfcpart.errors import WeightError
from sfcpart.slices.gate import agreed
from sfcpart.slices.linking import lowest_of_pairs
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import dealing

__all__ = ["groups_from_field", "groups_from_pairs", "join_groups"]


def groups_from_field(values: ArrayLike, *, held: MeshSlice | None = None) -> Int64Array:
    """Keep cells with equal values together.

    Parameters
    ----------
    values : (n_local,) numbers or text
        Negative numbers, NaN and empty text are free.
    held : MeshSlice, optional
        The cells of this rank, if they are not all; all ranks call then.

    Returns
    -------
    (n_local,) int64
        Integers are kept as group numbers; other groups are named by their lowest cell.

    Raises
    ------
    WeightError
        If there is not one value a cell.

    Notes
    -----
    O(n log n); 16 bytes (or the size of the text and 8) for each value that a rank has.

    Examples
    --------
    >>> groups_from_field([7, -1, 7, 2]).tolist(), groups_from_field([0.5, np.nan, 0.5]).tolist()
    ([7, -1, 7, 2], [0, -1, 0])
    """
    comm: Comm = SerialComm() if held is None else held.comm
    array = agreed(comm, lambda: _checked_field(values))
    if array.dtype.kind in "bi":
        return np.maximum(array.astype(GID), -1)
    free = _free(array)
    value, first, inverse = np.unique(array[~free], return_index=True, return_inverse=True)
    first_gid = 0 if held is None else held.first_gid
    cell = first_gid + np.flatnonzero(~free)[first]
    group = np.full(len(array), -1, GID)
    group[~free] = _lowest_by_value(value, cell, comm)[inverse.reshape(-1)]
    return group


def _checked_field(values: ArrayLike) -> Array:
    """Return one number or text a cell; floats and texts of one width on all ranks."""
    array = np.asarray(values)
    if array.ndim != 1 or array.dtype.kind not in "biufUS":
        raise WeightError(
            f"the group field has shape {array.shape} and type {array.dtype}; "
            "wanted one number a cell"
        )
    if array.dtype.kind == "f":
        return array.astype(np.float64) + 0.0  # -0.0 and 0.0 are equal
    return array.astype(np.uint64) if array.dtype.kind == "u" else array


def _free(array: Array) -> Array:
    """Mark values that stand for no group."""
    if array.dtype.kind == "f":
        return np.asarray(~(array >= 0))
    if array.dtype.kind == "u":
        return np.zeros(len(array), np.bool_)
    return np.asarray(array == array.dtype.type())


def _lowest_by_value(value: Array, cell: Int64Array, comm: Comm) -> Int64Array:
    """Return for each of this rank's values the lowest of the cells that ranks give for it."""
    if value.dtype.kind in "US":
        letters = np.array([value.dtype.itemsize // np.dtype(f"{value.dtype.kind}1").itemsize])
        value = value.astype(f"{value.dtype.kind}{max(1, comm.allreduce(letters, 'max')[0])}")
        home = np.array([zlib.crc32(str(text).encode()) for text in value.tolist()], np.uint64)
    else:
        home = value.view(np.uint64)
    way = dealing(comm, (home % np.uint64(comm.size)).astype(np.int64))
    came, lowest = way.forward(value), way.forward(cell)
    _, which = np.unique(came, return_inverse=True)
    return way.back(_least(lowest, which.reshape(-1)))


def _least(values: Int64Array, which: Int64Array) -> Int64Array:
    """Return for each row the least value of the rows of its kind."""
    least = np.full(int(which.max(initial=-1)) + 1, np.iinfo(GID).max)
    np.minimum.at(least, which, values)
    return least[which]


def groups_from_pairs(
    pairs: ArrayLike, *, n_cells: int | None = None, held: MeshSlice | None = None
) -> Int64Array:
    """Keep the cells of each pair together, and whatever pairs link.

    Parameters
    ----------
    pairs : (m, 2) integers
        Cells, by number in the whole mesh. Ranks may hold different pairs.
    n_cells : int, optional
        Number of cells, if one rank holds all.
    held : MeshSlice, optional
        The cells of this rank, if they are not all; all ranks call then.

    Returns
    -------
    (n_local,) int64
        A group is named by its lowest cell.

    Raises
    ------
    WeightError
        If the pairs are not two integers a row, or a cell is out of range.

    Notes
    -----
    O(n + m log m) (`sfcpart.slices.linking`).

    Examples
    --------
    >>> groups_from_pairs([[4, 1], [1, 3]], n_cells=5).tolist()
    [-1, 1, -1, 1, 1]
    """
    comm: Comm = SerialComm() if held is None else held.comm
    first = np.array([0, n_cells or 0], GID) if held is None else held.rank_first
    array = agreed(comm, lambda: _checked_pairs(pairs, int(first[-1])))
    return group_of_pairs(array, first=first, comm=comm)


def _checked_pairs(pairs: ArrayLike, n_cells: int) -> Int64Array:
    """Return pairs of cells."""
    array = np.asarray(pairs)
    if array.size == 0:
        return np.empty((0, 2), GID)
    if array.ndim != 2 or array.shape[1] != 2 or array.dtype.kind not in "iu":
        raise WeightError(
            f"pairs have shape {array.shape} and type {array.dtype}; "
            "wanted two cell numbers a row, (m, 2)"
        )
    if array.min() < 0 or array.max() >= n_cells:
        row = int(np.flatnonzero(((array < 0) | (array >= n_cells)).any(axis=1))[0])
        raise WeightError(
            f"pair {row} is {tuple(array[row].tolist())}; cells go from 0 to {n_cells - 1}"
        )
    return array.astype(GID)


def group_of_pairs(pairs: Int64Array, *, first: Int64Array, comm: Comm) -> Int64Array:
    """Name the cells that pairs link by the lowest of them; the rest are free (collective)."""
    gid, lowest = lowest_of_pairs(pairs[pairs[:, 0] != pairs[:, 1]], first=first, comm=comm)
    low, high = (int(edge) for edge in first[comm.rank : comm.rank + 2])
    group = np.full(high - low, -1, GID)
    group[gid - low] = lowest
    return group


def join_groups(*groups: Int64Array, held: MeshSlice | None = None) -> Int64Array:
    """Unite groupings of the same cells: what any of them holds together stays together.

    Parameters
    ----------
    *groups : (n_local,) int64
        Group numbers, -1 for free cells.
    held : MeshSlice, optional
        The cells of this rank, if they are not all; all ranks call then.

    Returns
    -------
    (n_local,) int64
        A group is named by its lowest cell; a group of one cell is free. A single grouping is
        returned as it is.

    Notes
    -----
    Cells are united on each rank by scipy's connected components, those of groups that have cells
    on several ranks then by `sfcpart.slices.linking`.

    Examples
    --------
    >>> join_groups(np.array([5, 5, -1, -1]), np.array([-1, 2, 2, 9])).tolist()
    [0, 0, 0, -1]
    """
    if len(groups) == 1:
        return groups[0]
    n_cells = len(groups[0])
    comm: Comm = SerialComm() if held is None else held.comm
    first = np.array([0, n_cells], GID) if held is None else held.rank_first
    first_gid = int(first[comm.rank])
    links = []
    for group in groups:
        order = np.argsort(group, kind="stable")
        order = order[np.count_nonzero(group < 0) :]
        same = group[order][1:] == group[order][:-1]
        links.append(np.stack([order[:-1][same], order[1:][same]], axis=1))
    lowest = _lowest_here(np.concatenate(links).astype(GID), n_cells)
    apart = np.concatenate([_links_over_ranks(group, lowest + first_gid, comm) for group in groups])
    gid, linked = lowest_of_pairs(apart, first=first, comm=comm)
    name = np.arange(first_gid, first_gid + n_cells)
    name[gid - first_gid] = linked
    alone = np.bincount(lowest, minlength=n_cells) == 1
    alone[gid - first_gid] = False
    return np.where(alone[lowest], -1, name[lowest])


def _lowest_here(links: Int64Array, n_cells: int) -> Int64Array:
    """Return the lowest cell that each is linked with."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    graph = coo_array((np.ones(len(links), np.int8), links.T), shape=(n_cells, n_cells))
    label = connected_components(graph.tocsr(), directed=False)[1]
    _, lowest = np.unique(label, return_index=True)
    return np.asarray(lowest[label], GID)


def _links_over_ranks(group: Int64Array, name: Int64Array, comm: Comm) -> Int64Array:
    """Return pairs of names that groups with cells on several ranks link."""
    number, first = np.unique(group, return_index=True)
    first = first[number >= 0]
    number, named = number[number >= 0], name[first]
    lowest = _lowest_by_value(number, named, comm)
    pairs = np.stack([named, lowest], axis=1)
    return np.asarray(pairs[named != lowest], GID)
