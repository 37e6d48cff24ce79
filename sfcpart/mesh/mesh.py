"""The mesh value: points, cells in file order, boundary groups and fields."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any

from sfcpart.dtypes import Array, FloatArray, Int64Array, IntArray, KindArray

__all__ = ["BoundaryGroup", "FaceList", "Mesh", "Polyhedra"]

_EMPTY: Mapping[str, Any] = MappingProxyType({})


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


@dataclass(frozen=True, eq=False)
class Mesh:
    """Cells of one dimension (2 or 3), in the file's own order, over read-only arrays.

    Attributes
    ----------
    points : (n_points, space_dim) float64, or None
        None for meshes given by faces or by centres.
    kind : (n_cells,) uint8
        VTK type code of each cell (open standard); `sfcpart.mesh.kinds` has the tables.
    indptr : (n_cells + 1,) int64
    indices : (sum,) int32 or int64
        Points of each cell in VTK order: corners first, then mid-side points if quadratic.
    polyhedra : Polyhedra or None
    faces : FaceList or None
        Given faces: they are then the truth, and points only for drawing.
    given_center, given_measure : arrays or None
        Centres and measures of meshes without points.
    cell_fields, point_fields : mapping of str to array
        Arrays of n_cells (n_points) rows.
    boundary : tuple of BoundaryGroup
    """

    points: FloatArray | None
    kind: KindArray
    indptr: Int64Array
    indices: IntArray
    polyhedra: Polyhedra | None = None
    faces: FaceList | None = None
    given_center: FloatArray | None = None
    given_measure: FloatArray | None = None
    cell_fields: Mapping[str, Array] = field(default=_EMPTY)
    point_fields: Mapping[str, Array] = field(default=_EMPTY)
    boundary: tuple[BoundaryGroup, ...] = ()
