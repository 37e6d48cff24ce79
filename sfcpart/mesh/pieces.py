"""Pieces of a mesh: faces of polyhedra, faces as given, boundary groups."""

from __future__ import annotations

from dataclasses import dataclass

from sfcpart.dtypes import FloatArray, Int64Array, IntArray, KindArray

__all__ = ["BoundaryGroup", "FaceList", "Polyhedra"]


@dataclass(frozen=True, eq=False)
class Polyhedra:
    """Faces of the polyhedral cells (rows of other cells are empty).

    Attributes
    ----------
    face_indptr : (n_faces + 1,) int64
    face_indices : (sum,) int32 or int64
        Points of each face, in turn around it.
    cell_indptr : (n_cells + 1,) int64
    cell_indices : (sum,) int32 or int64
        Faces of each cell; a face shared by two cells is stored once or twice.
    """

    face_indptr: Int64Array
    face_indices: IntArray
    cell_indptr: Int64Array
    cell_indices: IntArray


@dataclass(frozen=True, eq=False)
class FaceList:
    """Faces as a finite-volume code holds them.

    Attributes
    ----------
    cell : (n_faces, 2) int32 or int64
        The two cells of each face; -1 as the second cell on the boundary.
    measure : (n_faces,) float64
    """

    cell: IntArray
    measure: FloatArray


@dataclass(frozen=True, eq=False)
class BoundaryGroup:
    """A named set of elements of lower dimension.

    Attributes
    ----------
    name : str
        As in the file, or made of field and tag ("gmsh:physical=7").
    tag : int
        Number in the file, -1 if it has none.
    kind : (n,) uint8
        VTK type codes.
    indptr, indices : CSR
        Points of each element.
    """

    name: str
    tag: int
    kind: KindArray
    indptr: Int64Array
    indices: IntArray
