"""Faces worth drawing: those of 2-D cells, or those where a part of a 3-D mesh ends.

Only cells at the rim of a part are looked at, and their faces matched by sorted corners, so the
cost follows the surface of the parts. O(n) in cells and entries of the cell graph, plus a sort of
the faces of the rim cells.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import Array, BoolArray, FloatArray, Int64Array, IntArray
from sfcpart.graph import CellGraph
from sfcpart.mesh.kinds import KINDS, POLYGON, POLYHEDRON
from sfcpart.mesh.mesh import Mesh
from sfcpart.report.contact import rim_cells

__all__ = ["Triangles", "cell_triangles", "part_surface"]


@dataclass(frozen=True, eq=False)
class Triangles:
    """Triangles to draw.

    Attributes
    ----------
    corners : (n, 3, 2 or 3) float64
    cell : (n,) int64
        The cell each belongs to.
    face : (n,) int64
        The face each belongs to: edges are drawn between faces, not between triangles.
    is_outer : (n,) bool
        Whether no other cell shares the face.
    """

    corners: FloatArray
    cell: Int64Array
    face: Int64Array
    is_outer: BoolArray


@dataclass(frozen=True, eq=False)
class _Faces:
    """Polygons as padded rows: corners (-1 behind the last) and the cell of each."""

    corner: IntArray
    size: Int64Array
    cell: Int64Array


def cell_triangles(mesh: Mesh) -> Triangles:
    """Return the cells of a 2-D mesh, or of a surface in 3-D, as triangles."""
    cells = np.arange(mesh.n_cells)
    faces = _joined([_flat_cells(mesh, cells[mesh.kind == kind], kind) for kind in _kinds(mesh)])
    return _fans(mesh, faces, np.ones(len(faces.cell), bool))


def part_surface(mesh: Mesh, cell_part: Array, *, graph: CellGraph) -> Triangles:
    """Return the faces of a 3-D mesh behind which there is another part or nothing.

    Parameters
    ----------
    mesh : Mesh
        A mesh with points.
    cell_part : (n_cells,) integers
    graph : CellGraph
        Of the mesh: it tells which cells are at the rim of their part.
    """
    cell_part = np.asarray(cell_part)
    is_rim = rim_cells(cell_part, graph)
    # A face of a cell at the boundary is outer if no neighbour has it; elsewhere none is outer.
    at_boundary = graph.boundary_count > 0
    cells = np.flatnonzero(is_rim | _with_neighbours(at_boundary, graph))
    kinds = mesh.kind[cells]
    faces = _joined([_solid_faces(mesh, cells[kinds == k], k) for k in np.unique(kinds)])
    other = _behind(faces)
    is_cut = cell_part[other] != cell_part[faces.cell]
    drawn = is_rim[faces.cell] & np.where(other < 0, at_boundary[faces.cell], is_cut)
    kept = _Faces(faces.corner[drawn], faces.size[drawn], faces.cell[drawn])
    return _fans(mesh, kept, other[drawn] < 0)


def _with_neighbours(chosen: BoolArray, graph: CellGraph) -> BoolArray:
    """Mark the chosen cells and all that share a face with them."""
    cells = np.flatnonzero(chosen)
    start = graph.indptr[cells]
    near = chosen.copy()
    near[graph.indices[_spread(start, graph.indptr[cells + 1] - start)]] = True
    return near


def _kinds(mesh: Mesh) -> Array:
    """Return the kinds of cells there are."""
    return np.unique(mesh.kind)


def _flat_cells(mesh: Mesh, cells: IntArray, kind: int) -> _Faces:
    """Return 2-D cells of one kind as polygons, corners in turn."""
    start = mesh.indptr[cells]
    if kind == POLYGON:
        return _ragged(mesh.indices, start, mesh.indptr[cells + 1] - start, cells)
    turn = [edge[0] for edge in KINDS[int(kind)].faces]
    corner = mesh.indices[start[:, None] + np.array(turn)]
    return _Faces(corner, np.full(len(cells), len(turn)), cells)


def _solid_faces(mesh: Mesh, cells: IntArray, kind: int) -> _Faces:
    """Return all faces of 3-D cells of one kind."""
    if kind == POLYHEDRON and mesh.polyhedra is not None:
        solid = mesh.polyhedra
        count = solid.cell_indptr[cells + 1] - solid.cell_indptr[cells]
        face = solid.cell_indices[_spread(solid.cell_indptr[cells], count)]
        start = solid.face_indptr[face]
        size = solid.face_indptr[face + 1] - start
        return _ragged(solid.face_indices, start, size, np.repeat(cells, count))
    start = mesh.indptr[cells]
    faces = KINDS[int(kind)].faces
    pieces = [
        _Faces(mesh.indices[start[:, None] + np.array(f)], np.full(len(cells), len(f)), cells)
        for f in faces
    ]
    return _joined(pieces)


def _ragged(indices: IntArray, start: IntArray, size: IntArray, cell: IntArray) -> _Faces:
    """Return polygons of different sizes as padded rows."""
    place = np.arange(int(size.max(initial=0)))
    inside = place < size[:, None]
    corner = indices[np.where(inside, start[:, None] + place, 0)]
    return _Faces(np.where(inside, corner, -1), size.astype(np.int64), cell)


def _spread(start: IntArray, count: IntArray) -> IntArray:
    """Return start[i], start[i] + 1, ... count[i] times, one after the other."""
    first = np.cumsum(count) - count
    places: IntArray = np.arange(int(count.sum())) + np.repeat(start - first, count)
    return places


def _joined(pieces: list[_Faces]) -> _Faces:
    """Put polygons one after the other, rows padded to the longest."""
    width = max((piece.corner.shape[1] for piece in pieces), default=0)
    padded = [
        np.pad(p.corner, ((0, 0), (0, width - p.corner.shape[1])), constant_values=-1)
        for p in pieces
    ]
    return _Faces(
        np.concatenate(padded),
        np.concatenate([p.size for p in pieces]),
        np.concatenate([p.cell for p in pieces]),
    )


def _behind(faces: _Faces) -> Int64Array:
    """Return the cell behind each face, -1 if there is none: equal three lowest corners match."""
    highest = np.iinfo(faces.corner.dtype).max
    sorted_corner = np.sort(np.where(faces.corner < 0, highest, faces.corner), axis=1)
    low, middle, high = (sorted_corner[:, k].astype(np.int64) for k in range(3))
    order = _sorted_rows(low, middle, high)
    same = np.ones(max(0, len(order) - 1), bool)
    for column in (low, middle, high):
        same &= column[order][1:] == column[order][:-1]
    same = np.flatnonzero(same)
    other = np.full(len(order), -1, np.int64)
    first, second = order[same], order[same + 1]
    other[first] = faces.cell[second]
    other[second] = faces.cell[first]
    return other


def _sorted_rows(low: Int64Array, middle: Int64Array, high: Int64Array) -> Int64Array:
    """Return an order in which equal triples are neighbours, by one sort if 63 bits hold each."""
    if not len(low) or max(int(low.max()), int(middle.max()), int(high.max())) >= 1 << 21:
        return np.lexsort((high, low << np.int64(31) ^ middle))
    return np.argsort(low << 42 | middle << 21 | high, kind="stable")


def _fans(mesh: Mesh, faces: _Faces, is_outer: BoolArray) -> Triangles:
    """Cut polygons into fans of triangles about their first corners."""
    assert mesh.points is not None
    face, corner = [], []
    for k in range(1, faces.corner.shape[1] - 1):
        rows = np.flatnonzero(faces.size > k + 1)
        face.append(rows)
        corner.append(faces.corner[rows][:, [0, k, k + 1]])
    ids = np.concatenate(face)
    return Triangles(
        # A plane mesh from a file may carry a third column of zeros.
        corners=mesh.points[:, : mesh.space_dim][np.concatenate(corner)],
        cell=faces.cell[ids].astype(np.int64),
        face=ids.astype(np.int64),
        is_outer=is_outer[ids],
    )
