"""Boundary groups of each part: which elements bound its own cells, in local numbers.

What: an element (a wall face, an inlet edge) goes to every part that owns a cell holding all of
its points. Faces have at most two such cells; for smaller elements (a line in 3-D) the two
lowest cells count. Elements no cell holds go nowhere.
Cost: O(entries of the cells) once, then O(elements).
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import OFFSET, Array, Int64Array, IntArray, index_dtype
from sfcpart.kernels.threads import run_ranges

if TYPE_CHECKING:
    from sfcpart.halo import Halo
    from sfcpart.mesh.mesh import BoundaryGroup, Mesh

__all__ = ["GroupByPart", "groups_by_part"]


@dataclass(frozen=True, eq=False)
class GroupByPart:
    """The elements of one boundary group, part after part.

    Attributes
    ----------
    name : str
    tag : int
    part_indptr : (n_parts + 1,) int64
        Rows of each part.
    element : (n_rows,) int64
        Number of the element in the unsplit group.
    cell : (n_rows,) int32 or int64
        Local number of the owned cell that holds it.
    kind : (n_rows,) uint8
    indptr : (n_rows + 1,) int64
    points : (sum,) int32 or int64
        Local points of each element.
    """

    name: str
    tag: int
    part_indptr: Int64Array
    element: Int64Array
    cell: IntArray
    kind: Array
    indptr: Int64Array
    points: IntArray


def groups_by_part(mesh: Mesh, halo: Halo, point_gid: list[IntArray]) -> Iterator[GroupByPart]:
    """Yield each boundary group of a mesh, its elements sorted by part.

    Parameters
    ----------
    mesh : Mesh
        With points (a mesh without has no boundary groups).
    halo : Halo
    point_gid : list of (n_points of the part,) integers
        Global numbers of the local points of each part.
    """
    if not mesh.boundary or mesh.points is None:
        return
    local_cell, owner = _local_cells(halo)
    relation = _cells_at_points(mesh)
    for group in mesh.boundary:
        cells = _cells_of(group, relation, mesh)
        element, cell = _one_row_a_part(cells, owner)
        order = np.argsort(owner[cell], kind="stable")
        element, cell = element[order], cell[order]
        counts = np.bincount(owner[cell], minlength=halo.n_parts)
        part_indptr = np.concatenate([[0], np.cumsum(counts)]).astype(OFFSET)
        indptr, points = _rows(group, element)
        yield GroupByPart(
            name=group.name,
            tag=group.tag,
            part_indptr=part_indptr,
            element=element,
            cell=local_cell[cell],
            kind=group.kind[element],
            indptr=indptr,
            points=_localised(points, indptr[part_indptr], point_gid, mesh.n_points),
        )


def _local_cells(halo: Halo) -> tuple[IntArray, IntArray]:
    """Return the local number and the owner of every cell."""
    sizes = np.diff(halo.owned_indptr)
    number = np.empty(halo.n_cells, halo.owned.dtype)
    number[halo.owned] = np.arange(halo.n_cells) - np.repeat(halo.owned_indptr[:-1], sizes)
    owner = np.empty(halo.n_cells, np.int32)
    owner[halo.owned] = np.repeat(np.arange(halo.n_parts), sizes)
    return number, owner


def _cells_at_points(mesh: Mesh) -> tuple[Int64Array, Int64Array]:
    """Return the cells at each point that a boundary element uses, ascending (CSR)."""
    used = np.zeros(mesh.n_points, np.bool_)
    for group in mesh.boundary:
        used[group.indices] = True
    entry = np.flatnonzero(used[mesh.indices])
    cell = np.searchsorted(mesh.indptr, entry, side="right") - 1
    point = mesh.indices[entry]
    counts = np.bincount(point, minlength=mesh.n_points)
    indptr = np.concatenate([[0], np.cumsum(counts)]).astype(OFFSET)
    return indptr, cell[np.argsort(point, kind="stable")].astype(np.int64)


def _cells_of(
    group: BoundaryGroup, relation: tuple[Int64Array, Int64Array], mesh: Mesh
) -> Int64Array:
    """Return up to two cells that hold each element, (n, 2), -1 where there is none."""
    from sfcpart.kernels.mesh.elements import cells_with_points

    found = np.full((len(group.kind), 2), -1, np.int64)
    rows = (group.indptr, group.indices, *relation, mesh.indptr, mesh.indices)
    run_ranges(cells_with_points, len(found), *rows, found)
    return found


def _one_row_a_part(cells: Int64Array, owner: IntArray) -> tuple[Int64Array, Int64Array]:
    """Return element and cell for every part that owns one of an element's cells."""
    first, second = cells.T
    other = (second >= 0) & (owner[second] != owner[first])
    has = np.flatnonzero(first >= 0)
    also = np.flatnonzero(other)
    element = np.concatenate([has, also])
    cell = np.concatenate([first[has], second[also]])
    order = np.argsort(element, kind="stable")
    return element[order], cell[order]


def _rows(group: BoundaryGroup, element: Int64Array) -> tuple[Int64Array, IntArray]:
    """Return the points of some elements of a group as CSR."""
    sizes = np.diff(group.indptr)[element]
    indptr = np.concatenate([[0], np.cumsum(sizes)]).astype(OFFSET)
    within = np.arange(indptr[-1]) - np.repeat(indptr[:-1], sizes)
    return indptr, group.indices[np.repeat(group.indptr[element], sizes) + within]


def _localised(
    points: IntArray, part_rows: Int64Array, point_gid: list[IntArray], n_points: int
) -> IntArray:
    """Replace global points by the local ones of each part."""
    local = np.empty(n_points, index_dtype(n_points))
    found = np.empty(len(points), local.dtype)
    for part, gid in enumerate(point_gid):
        rows = slice(part_rows[part], part_rows[part + 1])
        if rows.start < rows.stop:
            local[gid] = np.arange(len(gid))
            found[rows] = local[points[rows]]
    return found
