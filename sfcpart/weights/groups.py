"""Cells that must stay together, as one group number a cell: -1 is free.

Groups come from a field (equal values), from pairs of cells, and from two boundary groups that are
copies of each other shifted by a constant (periodic or coupled boundaries). `join_groups` unites
several: cells that any of them holds together stay together.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import GID, Array, FloatArray, Int64Array, IntArray
from sfcpart.errors import WeightError
from sfcpart.mesh.kinds import kind_tables
from sfcpart.mesh.mesh import BoundaryGroup, Mesh

__all__ = ["groups_from_boundaries", "groups_from_field", "groups_from_pairs", "join_groups"]


def groups_from_field(values: ArrayLike) -> Int64Array:
    """Keep cells with equal values together.

    Parameters
    ----------
    values : (n_cells,) numbers or text
        Negative numbers, NaN and empty text are free.

    Returns
    -------
    (n_cells,) int64
        Integers are kept as group numbers; other values are numbered in ascending order.

    Raises
    ------
    WeightError
        If there is not one value a cell.

    Examples
    --------
    >>> groups_from_field([7, -1, 7, 2]).tolist(), groups_from_field([0.5, np.nan, 0.5]).tolist()
    ([7, -1, 7, 2], [0, -1, 0])
    """
    array = np.asarray(values)
    if array.ndim != 1 or array.dtype.kind not in "biufUS":
        raise WeightError(
            f"the group field has shape {array.shape} and type {array.dtype}; "
            "wanted one number a cell"
        )
    if array.dtype.kind in "bi":
        return np.maximum(array.astype(GID), -1)
    free = array == "" if array.dtype.kind == "U" else np.zeros(len(array), np.bool_)
    if array.dtype.kind == "f":
        free = ~(array >= 0)
    if array.dtype.kind == "S":
        free = array == b""
    group = np.full(len(array), -1, GID)
    group[~free] = np.unique(array[~free], return_inverse=True)[1]
    return group


def groups_from_pairs(pairs: ArrayLike, *, n_cells: int) -> Int64Array:
    """Keep the cells of each pair together, and whatever pairs link.

    Parameters
    ----------
    pairs : (m, 2) integers
        Cells.
    n_cells : int

    Returns
    -------
    (n_cells,) int64
        A group is named by its lowest cell.

    Raises
    ------
    WeightError
        If the pairs are not two integers a row, or a cell is out of range.

    Notes
    -----
    O(n + m), connected components by scipy.

    Examples
    --------
    >>> groups_from_pairs([[4, 1], [1, 3]], n_cells=5).tolist()
    [-1, 1, -1, 1, 1]
    """
    array = np.asarray(pairs)
    if array.size == 0:
        return np.full(n_cells, -1, GID)
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
    return _united(array.astype(GID), n_cells)


def join_groups(*groups: Int64Array) -> Int64Array:
    """Unite groupings of the same cells: what any of them holds together stays together.

    Parameters
    ----------
    *groups : (n_cells,) int64
        Group numbers, -1 for free cells.

    Returns
    -------
    (n_cells,) int64
        A group is named by its lowest cell; a group of one cell is free. A single grouping is
        returned as it is.

    Examples
    --------
    >>> join_groups(np.array([5, 5, -1, -1]), np.array([-1, 2, 2, 9])).tolist()
    [0, 0, 0, -1]
    """
    if len(groups) == 1:
        return groups[0]
    n_cells = len(groups[0])
    links = []
    for group in groups:
        order = np.argsort(group, kind="stable")
        order = order[np.count_nonzero(group < 0) :]
        same = group[order][1:] == group[order][:-1]
        links.append(np.stack([order[:-1][same], order[1:][same]], axis=1))
    return _united(np.concatenate(links).astype(GID), n_cells)


def _united(links: Int64Array, n_cells: int) -> Int64Array:
    """Name connected cells by the lowest of them; the rest are free."""
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    graph = coo_array((np.ones(len(links), np.int8), links.T), shape=(n_cells, n_cells))
    label = connected_components(graph.tocsr(), directed=False)[1]
    _, lowest = np.unique(label, return_index=True)
    group = lowest[label].astype(GID)
    group[np.bincount(label, minlength=1)[label] == 1] = -1
    return group


def groups_from_boundaries(
    mesh: Mesh, sides: tuple[str, str], *, tolerance: float = 1e-6
) -> Int64Array:
    """Keep the two sides of a periodic or coupled boundary together.

    The elements of one boundary group are matched with those of the other by their centres, after
    the mean offset between the groups has been taken out; the two cells behind a matched pair
    become one group.

    Parameters
    ----------
    mesh : Mesh
        With points and boundary groups.
    sides : pair of str
        Names of the two groups.
    tolerance : float
        Largest distance of matched centres, as a share of the extent of the first group.

    Returns
    -------
    (n_cells,) int64

    Raises
    ------
    WeightError
        If a group is unknown, the groups differ in size, an element has no partner, or no cell
        has it as a face.

    Notes
    -----
    O(n log n), nearest neighbours by scipy's k-d tree.
    """
    from scipy.spatial import cKDTree

    first, second = sides
    pair = [_boundary_group(mesh, name) for name in sides]
    sizes = [len(group.kind) for group in pair]
    if sizes[0] != sizes[1]:
        raise WeightError(
            f"boundary {first!r} has {sizes[0]} elements and {second!r} {sizes[1]}; "
            "a periodic pair has as many on both sides"
        )
    center = [_element_centers(mesh, group) for group in pair]
    center[1] = center[1] - (center[1].mean(axis=0) - center[0].mean(axis=0))
    found = cKDTree(center[1]).query(center[0])
    distance, partner = np.asarray(found[0]), np.asarray(found[1])
    within = tolerance * float(np.linalg.norm(np.ptp(center[0], axis=0)))
    twice = np.bincount(partner, minlength=sizes[1]).max() > 1
    worst = int(np.argmax(distance))
    if distance[worst] > within or twice:
        raise WeightError(
            f"boundaries {first!r} and {second!r} do not match by a shift: the centre of element "
            f"{worst} of {first!r} misses its partner by {distance[worst]:.3g}, allowed are "
            f"{within:.3g}"
        )
    cells = [_cells_behind(mesh, group) for group in pair]
    return _united(np.stack([cells[0], cells[1][partner]], axis=1), mesh.n_cells)


def _boundary_group(mesh: Mesh, name: str) -> BoundaryGroup:
    """Return the elements of all boundary groups of that name."""
    found = [group for group in mesh.boundary if group.name == name and len(group.kind)]
    if not found or mesh.points is None:
        known = ", ".join(sorted({repr(group.name) for group in mesh.boundary})) or "none"
        raise WeightError(f"there is no boundary group {name!r}; the mesh has {known}")
    if len(found) == 1:
        return found[0]
    sizes = np.concatenate([np.diff(group.indptr) for group in found])
    return BoundaryGroup(
        name=name,
        tag=-1,
        kind=np.concatenate([group.kind for group in found]),
        indptr=np.concatenate(([0], np.cumsum(sizes))).astype(np.int64),
        indices=np.concatenate([group.indices for group in found]),
    )


def _element_corners(group: BoundaryGroup) -> tuple[Int64Array, IntArray]:
    """Return the corners of the elements as CSR, mid-side points left out."""
    size = np.diff(group.indptr)
    n_corners = kind_tables().n_corners[group.kind].astype(np.int64)
    n_corners = np.where(n_corners > 0, n_corners, size)
    place = np.arange(len(group.indices)) - np.repeat(group.indptr[:-1], size)
    keep = place < np.repeat(n_corners, size)
    return np.concatenate(([0], np.cumsum(n_corners))), group.indices[keep]


def _element_centers(mesh: Mesh, group: BoundaryGroup) -> FloatArray:
    """Return the mean of the corners of each element."""
    assert mesh.points is not None
    indptr, corner = _element_corners(group)
    total = np.add.reduceat(mesh.points[corner], indptr[:-1], axis=0)
    return np.asarray(total / np.diff(indptr)[:, None])


def _cells_behind(mesh: Mesh, group: BoundaryGroup) -> Array:
    """Return, for each element, the lowest cell that has all its corners."""
    from scipy.sparse import csr_array

    indptr, corner = _element_corners(group)
    used, column = np.unique(corner, return_inverse=True)
    place = np.full(mesh.n_points, -1, np.int64)
    place[used] = np.arange(len(used))
    cell_ptr, point = _points_of_cells(mesh)
    cell = np.repeat(np.arange(mesh.n_cells), np.diff(cell_ptr))
    touches = place[point] >= 0
    shape = (len(used), mesh.n_cells)
    ones = np.ones(np.count_nonzero(touches), np.int32)
    around = csr_array((ones, (place[point[touches]], cell[touches])), shape=shape)
    around.data[:] = 1
    element = csr_array(
        (np.ones(len(column), np.int32), column, indptr), shape=(len(indptr) - 1, len(used))
    )
    shared = (element @ around).tocoo()
    full = shared.data == np.diff(indptr)[shared.row]
    behind = np.full(len(indptr) - 1, mesh.n_cells, np.int64)
    np.minimum.at(behind, shared.row[full], shared.col[full])
    if np.any(behind == mesh.n_cells):
        bad = int(np.argmax(behind == mesh.n_cells))
        raise WeightError(f"element {bad} of boundary {group.name!r} is no face of any cell")
    return behind


def _points_of_cells(mesh: Mesh) -> tuple[Int64Array, IntArray]:
    """Return the points of every cell as CSR; those of polyhedra come from their faces."""
    if mesh.polyhedra is None:
        return mesh.indptr, mesh.indices
    solid = mesh.polyhedra
    face_size = np.diff(solid.face_indptr)[solid.cell_indices]
    starts = solid.face_indptr[solid.cell_indices]
    inner = np.arange(face_size.sum()) - np.repeat(np.cumsum(face_size) - face_size, face_size)
    from_faces = solid.face_indices[np.repeat(starts, face_size) + inner]
    face_cell = np.repeat(np.arange(mesh.n_cells), np.diff(solid.cell_indptr))
    cell = np.concatenate(
        [np.repeat(np.arange(mesh.n_cells), np.diff(mesh.indptr)), np.repeat(face_cell, face_size)]
    )
    point = np.concatenate([mesh.indices, from_faces])
    order = np.argsort(cell, kind="stable")
    return np.concatenate(([0], np.cumsum(np.bincount(cell, minlength=mesh.n_cells)))), point[order]
