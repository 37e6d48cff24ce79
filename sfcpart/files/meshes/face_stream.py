"""Unpack polyhedra from VTK's face streams into CSR relations.

A face stream lists, cell after cell, the number of faces, then for each face the number of its
points and the points. All cells advance one face at a time, so the work is a few numpy calls
for each face of the richest cell, not a loop over cells.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import OFFSET, Array, BoolArray, Int64Array, index_dtype
from sfcpart.errors import FileError
from sfcpart.files.meshes.raw import narrow_ids
from sfcpart.mesh.mesh import Polyhedra

__all__ = ["unpack_face_stream"]


def unpack_face_stream(
    stream: Array, start: Int64Array, stop: Int64Array, *, is_polyhedron: BoolArray, n_points: int
) -> Polyhedra:
    """Return the faces of every polyhedron; faces are stored once for each cell that has them.

    Parameters
    ----------
    stream : (n,) integers
    start, stop : (n_polyhedra,) int64
        Where the stream of each polyhedron begins (at its number of faces) and ends.
    is_polyhedron : (n_elements,) bool
    n_points : int

    Raises
    ------
    FileError
        If a stream runs out of its bounds.
    """
    if np.any(start < 0) or np.any(stop > len(stream)) or np.any(start >= stop):
        raise FileError("the faces of polyhedra lie outside their array; the file is damaged")
    n_faces = stream[start].astype(OFFSET)
    if np.any(n_faces < 0) or np.any(n_faces > stop - start):
        raise FileError("a polyhedron claims more faces than it lists; the file is damaged")
    cell_indptr = np.zeros(len(is_polyhedron) + 1, OFFSET)
    per_element = np.zeros(len(is_polyhedron), OFFSET)
    per_element[is_polyhedron] = n_faces
    np.cumsum(per_element, out=cell_indptr[1:])
    first = np.cumsum(n_faces) - n_faces
    at, size = _face_places(stream, start, stop, n_faces, first)
    face_indptr = np.zeros(len(size) + 1, OFFSET)
    np.cumsum(size, out=face_indptr[1:])
    place = np.arange(face_indptr[-1]) + np.repeat(at - face_indptr[:-1], size)
    return Polyhedra(
        face_indptr=face_indptr,
        face_indices=narrow_ids(stream[place], n_points),
        cell_indptr=cell_indptr,
        cell_indices=np.arange(len(size), dtype=index_dtype(len(size))),
    )


def _face_places(
    stream: Array, start: Int64Array, stop: Int64Array, n_faces: Int64Array, first: Int64Array
) -> tuple[Int64Array, Int64Array]:
    """Walk all cells face by face; return where each face's points begin, and how many."""
    at = np.zeros(int(n_faces.sum()), OFFSET)
    size = np.zeros(len(at), OFFSET)
    place = start + 1
    for turn in range(int(n_faces.max(initial=0))):
        cell = np.flatnonzero(n_faces > turn)
        here = place[cell]
        if np.any(here >= stop[cell]):
            raise FileError("the faces of a polyhedron are cut short; the file is damaged")
        count = stream[here].astype(OFFSET)
        if np.any(count < 0) or np.any(here + 1 + count > stop[cell]):
            raise FileError("a face of a polyhedron is cut short; the file is damaged")
        at[first[cell] + turn] = here + 1
        size[first[cell] + turn] = count
        place[cell] = here + 1 + count
    return at, size
