"""Boundary groups of each part: which elements bound its own cells, in local numbers.

What: an element (a wall face, an inlet edge) goes to every part that owns a cell holding all of
its points. Faces have at most two such cells; for smaller elements (a line in 3-D) the two
lowest cells count. Elements no cell holds go nowhere.
How: ranks that hold the cells know their elements (`sfcpart.slices.elements`) and send them to the
ranks that write the parts.
Cost: O(entries of the cells) once, then O(elements).
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import GID, OFFSET, Array, Int64Array, IntArray
from sfcpart.mesh.mesh import BoundaryGroup
from sfcpart.slices.elements import cells_of_elements
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import ask_rows, block_bounds, dealing, owner_of, take_ragged

if TYPE_CHECKING:
    from sfcpart.files.parts.supply import Supply
    from sfcpart.halo import Halo

__all__ = ["GroupByPart", "groups_by_part"]


@dataclass(frozen=True, eq=False)
class GroupByPart:
    """The elements of one boundary group at the parts of a rank, part after part.

    Attributes
    ----------
    name : str
    tag : int
    part_indptr : (k + 1,) int64
        Rows of each part.
    element : (n_rows,) int64
        Number of the element in the unsplit group.
    cell : (n_rows,) int32 or int64
        Local number of the owned cell that holds it.
    kind : (n_rows,) uint8
    indptr : (n_rows + 1,) int64
    points : (sum,) int32 or int64
        Local points of each element.
    n_points : int
        Points of the unsplit mesh.
    """

    name: str
    tag: int
    part_indptr: Int64Array
    element: Int64Array
    cell: IntArray
    kind: Array
    indptr: Int64Array
    points: IntArray
    n_points: int


def groups_by_part(
    held: MeshSlice, supply: Supply, halo: Halo, point_gid: Sequence[Int64Array]
) -> Iterator[GroupByPart]:
    """Yield each boundary group of a mesh, its elements sorted by part (collective).

    Parameters
    ----------
    held : MeshSlice
        With points (a mesh without has no boundary groups).
    supply : Supply
        Of it.
    halo : Halo
        Of this rank's parts.
    point_gid : sequence of (n_points of the part,) integers
        Global numbers of the local points of each of them.
    """
    if not held.mesh.boundary or held.mesh.points is None:
        return
    local = _Numbers.of(halo, point_gid)
    for group, element_gid, cells in _elements_held(held):
        rows = _sent_to_parts(held, supply, group, element_gid, cells)
        yield local.of_group(group, rows, held.n_points)


def _elements_held(held: MeshSlice) -> list[tuple[BoundaryGroup, Int64Array, Int64Array]]:
    """Return each group with the numbers of its elements here, and their cells."""
    boundary = held.mesh.boundary
    if held.groups is not None:
        pairs = zip(boundary, held.groups, strict=True)
        return [(group, rows.element_gid, rows.cell_gid) for group, rows in pairs]
    found = zip(boundary, cells_of_elements(held.mesh), strict=True)
    return [(group, np.arange(len(group.kind), dtype=GID), cells) for group, cells in found]


@dataclass(frozen=True, eq=False)
class _Rows:
    """Elements at cells of parts, by part and number; points and cells by global number."""

    part: Int64Array
    element: Int64Array
    cell: Int64Array
    kind: Array
    indptr: Int64Array
    points: Int64Array


def _sent_to_parts(
    held: MeshSlice,
    supply: Supply,
    group: BoundaryGroup,
    element_gid: Int64Array,
    cells: Int64Array,
) -> _Rows:
    """Send every element to the writers of the parts that own one of its cells."""
    first, second = cells.T
    known = np.where(cells >= 0, cells, 0)
    parts = ask_rows(held.comm, supply.part, first=held.rank_first, gid=known.reshape(-1))
    part = parts.reshape(cells.shape).astype(GID)
    lo, hi = held.first_gid, held.first_gid + held.n_local
    mine = np.flatnonzero((first >= lo) & (first < hi))
    also = np.flatnonzero((second >= lo) & (second < hi) & (part[:, 0] != part[:, 1]))
    row = np.concatenate([mine, also])
    part_of = np.concatenate([part[mine, 0], part[also, 1]])
    cell = np.concatenate([first[mine], second[also]])
    way = dealing(held.comm, owner_of(part_of, block_bounds(supply.n_parts, held.comm.size)))
    points = np.asarray(held.global_points(group.indices), GID)
    indptr, points = way.forward_ragged(*take_ragged(group.indptr, points, row))
    came = [way.forward(rows) for rows in (part_of, element_gid[row], cell, group.kind[row])]
    order = np.lexsort((came[1], came[0]))
    indptr, points = take_ragged(indptr, points, order)
    part_of, element, cell, kind = (rows[order] for rows in came)
    return _Rows(part_of, element, cell, kind, indptr, points)


@dataclass(frozen=True, eq=False)
class _Numbers:
    """Local numbers of the cells and points of each part of a rank."""

    first_part: int
    owned: list[tuple[Int64Array, Int64Array]]
    points: list[tuple[Int64Array, Int64Array]]

    @classmethod
    def of(cls, halo: Halo, point_gid: Sequence[Int64Array]) -> _Numbers:
        """Sort the numbers of each part, to be looked up."""
        owned = [halo.owned[a:b] for a, b in pairwise(halo.owned_indptr)]
        return cls(halo.first_part, list(map(_sorted, owned)), list(map(_sorted, point_gid)))

    def of_group(self, group: BoundaryGroup, rows: _Rows, n_points: int) -> GroupByPart:
        """Replace global numbers by the local ones of each part."""
        n_parts = len(self.points)
        parts = self.first_part + np.arange(n_parts + 1)
        part_indptr = np.searchsorted(rows.part, parts).astype(OFFSET)
        cell, points = np.empty(len(rows.cell), GID), np.empty(len(rows.points), GID)
        for k in range(n_parts):
            some = slice(part_indptr[k], part_indptr[k + 1])
            entries = slice(rows.indptr[some.start], rows.indptr[some.stop])
            cell[some] = _looked_up(rows.cell[some], *self.owned[k])
            points[entries] = _looked_up(rows.points[entries], *self.points[k])
        about, tables = (group.name, group.tag, part_indptr), (rows.kind, rows.indptr)
        return GroupByPart(*about, rows.element, cell, *tables, points, n_points)


def _sorted(gid: IntArray) -> tuple[Int64Array, Int64Array]:
    """Return numbers in ascending order, and where each of them was."""
    order = np.argsort(gid, kind="stable")
    return gid[order], order


def _looked_up(wanted: Int64Array, gid: Int64Array, place: Int64Array) -> Int64Array:
    """Return the places of some numbers."""
    return place[np.searchsorted(gid, wanted)]
