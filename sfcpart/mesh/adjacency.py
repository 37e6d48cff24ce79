"""Which cells share a face: the driver of the kernels `faces`, `face_match` and `face_rows`.

Cells are cut into blocks, one a thread, that list faces and count them by smallest corner; buckets
of equal smallest corner are then matched in chunks. Neither number shows in the result.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeAlias

import numpy as np

from sfcpart.dtypes import (
    COORDINATE,
    OFFSET,
    BoolArray,
    FloatArray,
    Int32Array,
    Int64Array,
    IntArray,
    index_dtype,
)
from sfcpart.errors import MeshError
from sfcpart.kernels.mesh import face_match, face_rows, faces
from sfcpart.kernels.mesh.cells import CellArrays
from sfcpart.kernels.threads import n_threads, run_ranges
from sfcpart.mesh.cell_arrays import spell_out
from sfcpart.mesh.kinds import MAX_CORNERS, POLYGON, POLYHEDRON, TETRA
from sfcpart.mesh.mesh import Mesh

__all__ = [
    "Adjacency",
    "Matching",
    "RimFaces",
    "join_cells",
    "join_matched",
    "match_cells",
    "sort_faces",
]

Adjacency: TypeAlias = tuple[Int64Array, IntArray, FloatArray, Int32Array, FloatArray]
_MOST_BLOCKS = 8
_CHUNKS = 64
_LOW = 0xFFFFFFFF
_LARGE = 1 << 30


@dataclass(frozen=True, eq=False)
class _Slots:
    """How the faces of cells are numbered: `stride` a cell if that is one number, else `start`."""

    count: int
    stride: int
    start: Int64Array
    cell: Int32Array

    def first(self, cells: Int64Array) -> Int64Array:
        """Return the first slot of cells."""
        return cells * self.stride if self.stride else self.start[cells]


def _number_slots(cells: CellArrays) -> _Slots:
    """Give the faces of all cells their numbers, cell by cell."""
    kind, n = cells.kind, len(cells.kind)
    stride = int(cells.face_count[kind[0]]) if n else 1
    if stride and (kind == kind[:1]).all():
        none = np.zeros(1, np.int32)
        return _Slots(_checked(stride * n), stride, none.astype(OFFSET), none)
    each = cells.face_count[kind].astype(np.int32)
    polygon, polyhedron = kind == POLYGON, kind == POLYHEDRON
    if polygon.any():
        each[polygon] = np.diff(cells.indptr)[polygon]
    if polyhedron.any():
        each[polyhedron] = np.diff(cells.poly_cell_indptr)[polyhedron]
    start = np.zeros(n + 1, OFFSET)
    np.cumsum(each, out=start[1:])
    _checked(int(start[-1]))
    return _Slots(int(start[-1]), 0, start, np.repeat(np.arange(n, dtype=np.int32), each))


def _checked(count: int) -> int:
    """Refuse what 30 bits cannot number."""
    if count >= faces.ID_LIMIT:
        raise MeshError(
            f"the mesh has {count} points or faces of cells; a cell graph takes fewer than "
            f"{faces.ID_LIMIT}: divide it by a curve alone, without measuring"
        )
    return count


@dataclass(frozen=True, eq=False)
class RimFaces:
    """Faces all of whose corners lie on other ranks too, as far as is known.

    Attributes
    ----------
    slot : (n,) int64, ascending
    indptr, corner : CSR
        The distinct corners of each, ascending.
    """

    slot: Int64Array
    indptr: Int64Array
    corner: Int64Array


@dataclass(frozen=True, eq=False)
class Matching:
    """The faces of cells and their mates (`sfcpart.kernels.mesh.faces` has the words)."""

    n_cells: int
    slots: _Slots
    face: Int64Array
    order: Int32Array
    rim: RimFaces

    def cell_of(self, slot: Int64Array) -> Int64Array:
        """Return the cells of slots."""
        if self.slots.stride:
            return slot // self.slots.stride
        return self.slots.cell[slot].astype(np.int64)

    def measure_of(self, slot: Int64Array) -> FloatArray:
        """Return the measures of faces."""
        measure: FloatArray = self.face.view(COORDINATE)[slot, 1]
        return measure

    def forget(self, slot: Int64Array) -> None:
        """Take faces out."""
        self.face[slot, 0] = -2


def join_cells(mesh: Mesh) -> Adjacency:
    """Join the cells that share a face with the same corners.

    Parameters
    ----------
    mesh : Mesh
        With points.

    Returns
    -------
    indptr, indices, data, boundary_count, boundary_measure : arrays
        As in `sfcpart.graph.CellGraph`.

    Raises
    ------
    MeshError
        If points or faces of cells number 2**30 or more.
    """
    return join_matched(match_cells(mesh, on_rim=np.zeros(0, np.bool_), all_tetra=True))


def join_matched(matching: Matching) -> Adjacency:
    """Write the rows of matched faces, as `join_cells` does."""
    n, slots, face, order = matching.n_cells, matching.slots, matching.face, matching.order
    indptr = np.zeros(n + 1, OFFSET)
    boundary_count = np.empty(n, np.int32)
    boundary_measure = np.empty(n, COORDINATE)
    shape = (slots.start, slots.stride, face, order)
    run_ranges(face_rows.count_rows, n, *shape, indptr, boundary_count)
    np.cumsum(indptr, out=indptr)
    indices = np.empty(indptr[-1], index_dtype(n))
    data = np.empty(indptr[-1], COORDINATE)
    faces_of = (slots.start, slots.cell, slots.stride, face, face.view(COORDINATE), order)
    run_ranges(face_rows.fill_rows, n, *faces_of, indptr, indices, data, boundary_measure)
    return (indptr, indices, data, boundary_count, boundary_measure)


def match_cells(mesh: Mesh, *, on_rim: BoolArray, all_tetra: bool) -> Matching:
    """Find mate and measure of each face of each cell.

    Parameters
    ----------
    mesh : Mesh
        With points.
    on_rim : (n_points,) bool, or empty
        Faces with all their corners among these are remembered.
    all_tetra : bool
        Whether the whole mesh may be tetrahedra, of which this is a slice: they have a way of
        their own, with another order of the faces of a cell.
    """
    _checked(mesh.n_points)
    cells = spell_out(mesh.cell_arrays())
    slots = _number_slots(cells)
    n_blocks = max(1, min(n_threads(), _MOST_BLOCKS, mesh.n_cells // 16_384))
    bounds = np.linspace(0, mesh.n_cells, n_blocks + 1).astype(OFFSET)
    count = np.zeros((n_blocks, mesh.n_points), np.int32)
    face = np.empty((slots.count, 2), np.int64)
    _list(mesh, cells, slots, bounds, face, count, all_tetra=all_tetra)
    rim = _rim_faces(face, cells, on_rim)
    bucket = np.empty(mesh.n_points + 1, np.int32)
    largest = face_match.place_buckets(count, bucket)
    order = np.empty(int(bucket[-1]), np.int32)
    shape = (slots.first(bounds), face, count, order)
    run_ranges(face_match.fill_buckets, n_blocks, *shape, smallest=1)
    del count, shape
    chunks = np.searchsorted(bucket, np.linspace(0, len(order), _CHUNKS + 1)).astype(OFFSET)
    chunks[0], chunks[-1] = 0, mesh.n_points
    run_ranges(
        face_match.match_faces,
        _CHUNKS,
        chunks,
        bucket,
        largest,
        mesh.points,
        cells.poly_face_indptr,
        cells.poly_face_indices,
        slots.cell,
        slots.stride,
        face,
        face.view(COORDINATE),
        order,
        smallest=1,
    )
    return Matching(mesh.n_cells, slots, face, order, rim)


def _rim_faces(face: Int64Array, cells: CellArrays, on_rim: BoolArray) -> RimFaces:
    """Pick the faces on the rim by their words, before these are matched."""
    if not on_rim.any():
        return RimFaces(np.zeros(0, OFFSET), np.zeros(1, OFFSET), np.zeros(0, OFFSET))
    on_rim = np.append(on_rim, False)  # for slots that are no face: their corner is -1
    slot = np.flatnonzero(on_rim[face[:, 0] >> 32])
    slot = slot[on_rim[face[slot, 0] & _LOW]]
    third, low = face[slot, 1] >> 32, face[slot, 1] & _LOW
    is_large = low & 3 == 3
    third, fourth = third & ~_LARGE, np.where(is_large, 0, low >> 2)
    held = ((third == 0) | on_rim[third]) & ((fourth == 0) | on_rim[fourth])
    slot, third, fourth = slot[held], third[held], fourth[held]
    row = np.where(is_large, low >> 2, -1)[held]
    corner = np.stack([face[slot, 0] >> 32, face[slot, 0] & _LOW, third, fourth], axis=1)
    size = 2 + (third > 0) + (fourth > 0)
    face_row = np.repeat(np.arange(len(slot)), size)
    flat = corner[np.arange(4) < size[:, None]]
    wide = np.flatnonzero(row >= 0)
    if len(wide):
        length = np.diff(cells.poly_face_indptr)[row[wide]]
        start = np.repeat(cells.poly_face_indptr[row[wide]] - np.cumsum(length) + length, length)
        ring = cells.poly_face_indices[start + np.arange(len(start))]
        pair = np.stack([np.repeat(wide, length), ring], axis=1)
        pair = np.unique(np.concatenate([np.stack([face_row, flat], axis=1), pair]), axis=0)
        face_row, flat = pair.T
    indptr = np.searchsorted(face_row, np.arange(len(slot) + 1))
    return RimFaces(slot, indptr.astype(OFFSET), np.ascontiguousarray(flat, np.int64))


def _list(
    mesh: Mesh,
    cells: CellArrays,
    slots: _Slots,
    bounds: Int64Array,
    face: Int64Array,
    count: Int32Array,
    *,
    all_tetra: bool,
) -> None:
    """List the faces of all cells; tetrahedra have a way of their own."""
    if all_tetra and slots.stride == 4 and mesh.kind[0] == TETRA:
        tetra = mesh.indices.reshape(-1, 4)
        run_ranges(faces.list_tetra_faces, len(count), bounds, tetra, face, count, smallest=1)
        return
    longest = max(MAX_CORNERS, int(np.diff(cells.poly_face_indptr).max(initial=0)))
    shape = (bounds, cells, mesh.dim, longest, slots.start, slots.stride, face, count)
    run_ranges(faces.list_faces, len(count), *shape, smallest=1)


def sort_faces(cell: IntArray, measure: FloatArray, n: int) -> Adjacency:
    """Sort given faces into rows.

    Parameters
    ----------
    cell : (n_faces, 2) integers
        The cells of each face, -1 as the second one on the boundary.
    measure : (n_faces,) float64
    n : int
        Number of cells.

    Returns
    -------
    indptr, indices, data, boundary_count, boundary_measure : arrays
        As in `sfcpart.graph.CellGraph`.
    """
    indptr = np.zeros(n + 1, OFFSET)
    boundary_count, boundary_measure = np.zeros(n, np.int32), np.zeros(n, COORDINATE)
    face_rows.count_given(cell, measure, indptr[1:], boundary_count, boundary_measure)
    np.cumsum(indptr, out=indptr)
    indices = np.empty(indptr[-1], index_dtype(n))
    data = np.empty(indptr[-1], COORDINATE)
    face_rows.place_given(cell, measure, indptr[:-1].copy(), indices, data)
    run_ranges(face_rows.sort_rows, n, indptr, indices, data.view(np.int64))
    return indptr, indices, data, boundary_count, boundary_measure
