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

__all__ = ["join_cells", "sort_faces"]

Adjacency: TypeAlias = tuple[Int64Array, IntArray, FloatArray, Int32Array, FloatArray]
_MOST_BLOCKS = 8
_CHUNKS = 64


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
    stride = int(cells.face_count[kind[0]])
    if stride and (kind == kind[0]).all():
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
    _checked(mesh.n_points)
    cells = spell_out(mesh.cell_arrays())
    slots = _number_slots(cells)
    face, order = _match(mesh, cells, slots)
    n = mesh.n_cells
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


def _match(mesh: Mesh, cells: CellArrays, slots: _Slots) -> tuple[Int64Array, Int32Array]:
    """Return mate and measure of each slot, and the slots by bucket (`kernels/mesh/faces.py`)."""
    n_blocks = max(1, min(n_threads(), _MOST_BLOCKS, mesh.n_cells // 16_384))
    bounds = np.linspace(0, mesh.n_cells, n_blocks + 1).astype(OFFSET)
    count = np.zeros((n_blocks, mesh.n_points), np.int32)
    face = np.empty((slots.count, 2), np.int64)
    _list(mesh, cells, slots, bounds, face, count)
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
    return face, order


def _list(
    mesh: Mesh,
    cells: CellArrays,
    slots: _Slots,
    bounds: Int64Array,
    face: Int64Array,
    count: Int32Array,
) -> None:
    """List the faces of all cells; tetrahedra have a way of their own."""
    if slots.stride == 4 and mesh.kind[0] == TETRA:
        tetra = mesh.indices.reshape(-1, 4)
        run_ranges(faces.list_tetra_faces, len(count), bounds, tetra, face, count, smallest=1)
        return
    longest = max(MAX_CORNERS, int(np.diff(cells.poly_face_indptr).max(initial=0)))
    shape = (bounds, cells, mesh.dim, longest, slots.start, slots.stride, face, count)
    run_ranges(faces.list_faces, len(count), *shape, smallest=1)


def sort_faces(mesh: Mesh) -> Adjacency:
    """Sort the faces a mesh was given into rows.

    Parameters
    ----------
    mesh : Mesh
        Made by `Mesh.from_faces`.

    Returns
    -------
    indptr, indices, data, boundary_count, boundary_measure : arrays
        As in `sfcpart.graph.CellGraph`.
    """
    assert mesh.faces is not None
    cell, measure, n = mesh.faces.cell, mesh.faces.measure, mesh.n_cells
    indptr = np.zeros(n + 1, OFFSET)
    boundary_count, boundary_measure = np.zeros(n, np.int32), np.zeros(n, COORDINATE)
    face_rows.count_given(cell, measure, indptr[1:], boundary_count, boundary_measure)
    np.cumsum(indptr, out=indptr)
    indices = np.empty(indptr[-1], index_dtype(n))
    data = np.empty(indptr[-1], COORDINATE)
    face_rows.place_given(cell, measure, indptr[:-1].copy(), indices, data)
    run_ranges(face_rows.sort_rows, n, indptr, indices, data.view(np.int64))
    return indptr, indices, data, boundary_count, boundary_measure
