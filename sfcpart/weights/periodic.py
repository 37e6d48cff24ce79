"""Cells at the two sides of a periodic or coupled boundary, kept together.

Over ranks the elements of the two boundary groups are brought to rank 0, which matches them: 48
bytes each there. That is the one thing here that grows with the mesh on one rank, as its surface.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import GID, FloatArray, Int64Array, IntArray
from sfcpart.errors import WeightError
from sfcpart.mesh.kinds import kind_tables
from sfcpart.mesh.mesh import BoundaryGroup, Mesh
from sfcpart.slices.elements import cells_of_elements
from sfcpart.slices.gate import agreed
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import gather_rows
from sfcpart.weights.groups import group_of_pairs

__all__ = ["groups_from_boundaries"]


@dataclass(frozen=True, eq=False)
class _Side:
    """The elements of one side on rank 0, by number: centres and the lowest cell of each."""

    name: str
    center: FloatArray
    cell: Int64Array


def groups_from_boundaries(
    mesh: Mesh | MeshSlice, sides: tuple[str, str], *, tolerance: float = 1e-6
) -> Int64Array:
    """Keep the two sides of a periodic or coupled boundary together.

    The elements of one boundary group are matched with those of the other by their centres, after
    the mean offset between the groups has been taken out; the two cells behind a matched pair
    become one group.

    Parameters
    ----------
    mesh : Mesh or MeshSlice
        With points and boundary groups; all ranks call together.
    sides : pair of str
        Names of the two groups.
    tolerance : float
        Largest distance of matched centres, as a share of the extent of the first group.

    Returns
    -------
    (n_local,) int64

    Raises
    ------
    WeightError
        If a group is unknown, the groups differ in size, an element has no partner, or no cell
        has it as a face.

    Notes
    -----
    O(n log n), nearest neighbours by scipy's k-d tree.
    """
    held = mesh if isinstance(mesh, MeshSlice) else MeshSlice.whole(mesh)
    sizes = agreed(held.comm, lambda: [_count(held, name) for name in sides])
    pair = [_gathered(held, name) for name in sides]
    found = agreed(held.comm, lambda: _matched(pair, sizes, tolerance, held.comm.rank))
    return group_of_pairs(found, first=held.rank_first, comm=held.comm)


def _count(held: MeshSlice, name: str) -> int:
    """Count the elements of all boundary groups of that name."""
    boundary = held.mesh.boundary
    sizes = [len(g.kind) for g in boundary]
    if held.groups is not None:
        sizes = [rows.n_elements for rows in held.groups]
    count = sum(size for g, size in zip(boundary, sizes, strict=True) if g.name == name)
    if held.groups is None and held.n_local != held.n_cells:
        raise WeightError(
            "the boundary groups of a mesh with `comm` are not known across ranks; give the "
            "slices of a mesh instead (sfcpart.read_slice)"
        )
    if not count or held.mesh.points is None:
        known = ", ".join(sorted({repr(group.name) for group in boundary})) or "none"
        raise WeightError(f"there is no boundary group {name!r}; the mesh has {known}")
    return count


def _gathered(held: MeshSlice, name: str) -> _Side:
    """Bring the elements of a name to rank 0, those that a cell holds; in order (collective)."""
    numbers, centers, cells, before = [], [], [], 0
    for k, group in enumerate(held.mesh.boundary):
        if group.name != name:
            continue
        gid, cell, n_elements = _rows_of(held, k)
        lowest = cell[:, 0]
        mine = np.flatnonzero((lowest >= held.first_gid) & (lowest < held.first_gid + held.n_local))
        numbers.append(before + gid[mine])
        centers.append(_element_centers(held.mesh, group)[mine])
        cells.append(lowest[mine])
        before += n_elements
    rows = [gather_rows(held.comm, np.concatenate(part)) for part in (numbers, centers, cells)]
    order = np.argsort(rows[0], kind="stable")
    center, cell = np.full((before, rows[1].shape[1]), np.nan), np.full(before, -1, GID)
    if held.comm.rank:
        return _Side(name, center[:0], cell[:0])
    center[rows[0][order]], cell[rows[0][order]] = rows[1][order], rows[2][order]
    return _Side(name, center, cell)


def _rows_of(held: MeshSlice, k: int) -> tuple[Int64Array, Int64Array, int]:
    """Return numbers, cells and count of the elements of a boundary group."""
    if held.groups is None:
        cell = cells_of_elements(held.mesh)[k]
        return np.arange(len(cell)), cell, len(cell)
    rows = held.groups[k]
    return rows.element_gid, rows.cell_gid, rows.n_elements


def _matched(pair: list[_Side], sizes: list[int], tolerance: float, rank: int) -> Int64Array:
    """Return the pairs of cells behind matched elements, on rank 0; none elsewhere."""
    from scipy.spatial import cKDTree

    if rank:
        return np.empty((0, 2), GID)
    first, second = pair[0].name, pair[1].name
    if sizes[0] != sizes[1]:
        raise WeightError(
            f"boundary {first!r} has {sizes[0]} elements and {second!r} {sizes[1]}; "
            "a periodic pair has as many on both sides"
        )
    for side in pair:
        if np.any(side.cell < 0):
            bad = int(np.argmax(side.cell < 0))
            raise WeightError(f"element {bad} of boundary {side.name!r} is no face of any cell")
    center = [side.center for side in pair]
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
    return np.stack([pair[0].cell, pair[1].cell[partner]], axis=1)


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
    if not len(group.kind):
        return np.empty((0, mesh.points.shape[1]))
    total = np.add.reduceat(mesh.points[corner], indptr[:-1], axis=0)
    return np.asarray(total / np.diff(indptr)[:, None])
