"""Boundary elements and the cells that hold them.

What: the at most two lowest cells that hold all points of an element. Faces have at most two such
cells; smaller elements (a line in 3-D) may have more, and the two lowest count.
Cost: O(entries of the cells), then O(elements).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import OFFSET, Array, Int64Array, KindArray
from sfcpart.kernels.threads import run_ranges
from sfcpart.mesh.mesh import BoundaryGroup, Mesh
from sfcpart.slices.routing import Dealing, block_bounds, dealing, owner_of, take_ragged

__all__ = ["Elements", "attach_elements", "cells_of_elements", "elements_of_cells"]


@dataclass(frozen=True, eq=False)
class Elements:
    """Elements of the boundary groups of a mesh, wherever they lie.

    Attributes
    ----------
    group : (n,) int64
        Number of the group of each.
    element_gid : (n,) int64
        Number of each in its group.
    kind : (n,) uint8
    indptr, indices : CSR
        Points of each, by global number.
    """

    group: Int64Array
    element_gid: Int64Array
    kind: KindArray
    indptr: Int64Array
    indices: Int64Array

    def dealt(self, way: Dealing) -> Elements:
        """Send every element to its rank."""
        indptr, indices = way.forward_ragged(self.indptr, self.indices)
        group, element_gid = way.forward(self.group), way.forward(self.element_gid)
        return Elements(group, element_gid, way.forward(self.kind), indptr, indices)

    def taken(self, rows: Int64Array) -> Elements:
        """Return some of the elements."""
        indptr, indices = take_ragged(self.indptr, self.indices, rows)
        return Elements(self.group[rows], self.element_gid[rows], self.kind[rows], indptr, indices)


def cells_of_elements(mesh: Mesh) -> tuple[Int64Array, ...]:
    """Return for each boundary group the two lowest cells at each element, kept on the mesh.

    Parameters
    ----------
    mesh : Mesh

    Returns
    -------
    tuple of (n_elements, 2) int64
        -1 where there is none.

    Examples
    --------
    >>> mesh = Mesh.from_arrays(
    ...     [[0, 0], [1, 0], [1, 1], [0, 1]],
    ...     {"triangle": [[0, 1, 2], [0, 2, 3]], "line": [[0, 1], [2, 0], [1, 3]]})
    >>> cells_of_elements(mesh)[0].tolist()
    [[0, -1], [0, 1], [-1, -1]]
    """
    return mesh.keep("cells of boundary elements", lambda: _cells_of_elements(mesh))


def _cells_of_elements(mesh: Mesh) -> tuple[Int64Array, ...]:
    """Find them for all groups."""
    if not mesh.boundary:
        return ()
    used = np.zeros(mesh.n_points, np.bool_)
    for group in mesh.boundary:
        used[group.indices] = True
    relation = _cells_at_points(mesh, used)
    return tuple(lowest_cells(mesh, group, relation) for group in mesh.boundary)


def _cells_at_points(mesh: Mesh, used: Array) -> tuple[Int64Array, Int64Array]:
    """Return the cells at each used point, ascending (CSR)."""
    entry = np.flatnonzero(used[mesh.indices])
    cell = np.searchsorted(mesh.indptr, entry, side="right") - 1
    point = mesh.indices[entry]
    counts = np.bincount(point, minlength=mesh.n_points)
    indptr = np.concatenate([[0], np.cumsum(counts)]).astype(OFFSET)
    return indptr, cell[np.argsort(point, kind="stable")].astype(np.int64)


def lowest_cells(
    mesh: Mesh, group: BoundaryGroup, relation: tuple[Int64Array, Int64Array]
) -> Int64Array:
    """Return up to two cells that hold each element, (n, 2), -1 where there is none."""
    from sfcpart.kernels.mesh.elements import cells_with_points

    found = np.full((len(group.kind), 2), -1, np.int64)
    rows = (group.indptr, group.indices, *relation, mesh.indptr, mesh.indices)
    run_ranges(cells_with_points, len(found), *rows, found)
    return found


def elements_of_cells(
    mesh: Mesh, lo: int, hi: int, *, point_gid: Int64Array
) -> list[dict[str, Array]]:
    """Return the elements at cells `lo` to `hi - 1` of a whole mesh, for each boundary group.

    Their points are numbered by their place in `point_gid`, the points of these cells.
    """
    held = []
    for group, cells in zip(mesh.boundary, cells_of_elements(mesh), strict=True):
        mine = np.flatnonzero(((cells >= lo) & (cells < hi)).any(axis=1))
        size = np.diff(group.indptr)[mine]
        indptr = np.concatenate(([0], np.cumsum(size))).astype(OFFSET)
        within = np.arange(indptr[-1]) - np.repeat(indptr[:-1], size)
        points = group.indices[np.repeat(group.indptr[mine], size) + within]
        held.append(
            {
                "kind": group.kind[mine],
                "indptr": indptr,
                "indices": np.searchsorted(point_gid, points).astype(np.int32),
                "element_gid": mine.astype(np.int64),
                "cell_gid": cells[mine],
            }
        )
    return held


def attach_elements(
    elements: Elements,
    mesh: Mesh,
    *,
    point_gid: Int64Array,
    n_points: int,
    rank_first: Int64Array,
    comm: Comm,
) -> tuple[Elements, Int64Array]:
    """Bring boundary elements to the ranks that hold their cells (collective).

    Parameters
    ----------
    elements : Elements
        Any of them on any rank.
    mesh : Mesh
        Local cells and points.
    point_gid : (mesh.n_points,) int64
    n_points : int
        Of the whole mesh.
    rank_first : (size + 1,) int64
        First cell of every rank.
    comm : Comm

    Returns
    -------
    elements : Elements
        Those held here by `GroupRows`'s rule, by group and number.
    cell_gid : (n, 2) int64
        The two lowest cells of each, -1 where there is none.

    Notes
    -----
    The rank that keeps the list of a block of points knows which ranks use them; elements ask
    there by their lowest point. Five exchanges; 8 bytes a point of each rank.
    """
    bounds = block_bounds(n_points, comm.size)
    where = dealing(comm, owner_of(point_gid, bounds))
    known = where.forward(point_gid)
    holder = np.repeat(np.arange(comm.size), where.received)
    order = np.argsort(known, kind="stable")
    known, holder = known[order], holder[order]

    first_point = np.minimum.reduceat(elements.indices, elements.indptr[:-1])
    at_home = elements.dealt(dealing(comm, owner_of(first_point, bounds)))
    pivot = np.minimum.reduceat(at_home.indices, at_home.indptr[:-1])
    low, high = np.searchsorted(known, pivot), np.searchsorted(known, pivot, side="right")
    row = np.repeat(np.arange(len(pivot)), high - low)
    within = np.arange(len(row)) - np.repeat(np.cumsum(high - low) - (high - low), high - low)
    way = dealing(comm, holder[low[row] + within])
    found = way.back(_cells_here(at_home.taken(row).dealt(way), mesh, point_gid, rank_first, comm))
    cell = _two_lowest(found, row, len(pivot))
    owner = np.where(cell >= 0, owner_of(cell, rank_first), -1)
    twice = (owner[:, 1] >= 0) & (owner[:, 1] != owner[:, 0])
    chosen = np.concatenate([np.flatnonzero(owner[:, 0] >= 0), np.flatnonzero(twice)])
    goal = np.concatenate([owner[owner[:, 0] >= 0, 0], owner[twice, 1]])
    last = dealing(comm, goal)
    mine, cells = at_home.taken(chosen).dealt(last), last.forward(cell[chosen])
    rows = np.lexsort((mine.element_gid, mine.group))
    return mine.taken(rows), cells[rows]


def _cells_here(
    asked: Elements, mesh: Mesh, point_gid: Int64Array, rank_first: Int64Array, comm: Comm
) -> Int64Array:
    """Return up to two local cells that hold each element, by global number, -1 for none."""
    place = np.searchsorted(point_gid, asked.indices)
    place[place == len(point_gid)] = 0
    there = point_gid[place] == asked.indices if len(point_gid) else np.zeros(len(place), np.bool_)
    whole = np.ones(len(asked.kind), np.bool_)
    np.logical_and.at(whole, np.repeat(np.arange(len(whole)), np.diff(asked.indptr)), there)
    rows = np.flatnonzero(whole)
    indptr, points = take_ragged(asked.indptr, place, rows)
    points = points.astype(mesh.indices.dtype)  # one kernel for all
    group = BoundaryGroup("", -1, asked.kind[rows], indptr, points)
    used = np.zeros(mesh.n_points, np.bool_)
    used[points] = True
    cells = np.full((len(whole), 2), -1, np.int64)
    local = lowest_cells(mesh, group, _cells_at_points(mesh, used))
    cells[rows] = np.where(local >= 0, local + rank_first[comm.rank], -1)
    return cells


def _two_lowest(found: Int64Array, row: Int64Array, n_rows: int) -> Int64Array:
    """Return the two lowest cells of each row, -1 where there are fewer."""
    cell, of = found.reshape(-1), np.repeat(row, 2)
    of, cell = of[cell >= 0], cell[cell >= 0]
    order = np.lexsort((cell, of))
    of, cell = of[order], cell[order]
    place = np.arange(len(of)) - np.searchsorted(of, of)
    lowest = np.full((n_rows, 2), -1, np.int64)
    lowest[of[place < 2], place[place < 2]] = cell[place < 2]
    return lowest
