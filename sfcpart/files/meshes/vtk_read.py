"""Read legacy VTK files: any grid and polygons, text or binary, versions 1.0 to 5.1.

A reader of its own because meshio refuses binary files of version 5.1 as VTK writes them, drops
the fields of meshes with polygons, skips voxels, and cannot read polyhedra. Structured grids
become hexahedra or quadrilaterals. Cost: one pass over the bytes; text takes about 10^7 numbers
a second.

Source: VTK file formats, "Simple legacy formats".
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

from sfcpart.dtypes import KIND, OFFSET, Array, Int64Array
from sfcpart.errors import FileError, InsufficientMemoryError
from sfcpart.files.meshes.face_stream import unpack_face_stream
from sfcpart.files.meshes.lattice import lattice_points, lattice_raw
from sfcpart.files.meshes.raw import RawMesh, narrow_ids, select_rows
from sfcpart.files.meshes.vtk_sections import CellArray, LegacyFile, read_sections
from sfcpart.mesh.kinds import POLYHEDRON, kind_tables
from sfcpart.mesh.mesh import Polyhedra

__all__ = ["read_vtk"]


def read_vtk(path: Path) -> RawMesh:
    """Read a legacy VTK file.

    Parameters
    ----------
    path : Path

    Returns
    -------
    RawMesh
        Elements in file order.

    Raises
    ------
    FileError
        If the file is cut short or damaged, or of a dataset type that is no mesh.
    """
    try:
        found = read_sections(path)
        if found.shape:
            return _structured(found)
        return _polygons(found) if found.dataset == "POLYDATA" else _grid(found)
    except (FileError, InsufficientMemoryError) as error:
        raise type(error)(f"{path}: {error}") from error


def _structured(found: LegacyFile) -> RawMesh:
    """Make the cells of a structured grid."""
    points, axes = found.points, found.axes
    if found.dataset == "STRUCTURED_POINTS":
        origin = axes.get("O", np.zeros(3))
        step = axes.get("S", axes.get("A", np.ones(3)))
        lines = [o + s * np.arange(n) for o, s, n in zip(origin, step, found.shape, strict=True)]
        points = lattice_points(lines)
    elif found.dataset == "RECTILINEAR_GRID" and {"X", "Y", "Z"} <= set(axes):
        points = lattice_points([axes["X"], axes["Y"], axes["Z"]])
    if points is None:
        raise FileError(f"is a dataset {found.dataset or 'of no type'} without points")
    return lattice_raw(points, found.shape, found.cell_fields, found.point_fields)


def _grid(found: LegacyFile) -> RawMesh:
    """Make elements of an unstructured grid."""
    cells = found.cells.get("CELLS")
    if found.dataset != "UNSTRUCTURED_GRID" or found.points is None:
        raise FileError(f"is a dataset {found.dataset or 'of no type'} without points")
    if cells is None or found.types is None:
        raise FileError("has no CELLS or no CELL_TYPES; it is cut short")
    kind = np.where((found.types < 0) | (found.types > 255), 255, found.types).astype(KIND)
    if len(kind) != cells.n_rows:
        raise FileError(f"has {cells.n_rows} cells, but {len(kind)} cell types")
    indptr, ids = _rows(cells, kind)
    return _with_polyhedra(found, kind, indptr, ids)


def _polygons(found: LegacyFile) -> RawMesh:
    """Make elements of polygonal data: points, lines, polygons, in this order."""
    if found.points is None:
        raise FileError("is a dataset POLYDATA without points")
    if "TRIANGLE_STRIPS" in found.cells:
        raise FileError("holds triangle strips; write them as triangles")
    kinds, offsets, ids = [np.zeros(0, KIND)], [np.zeros(1, OFFSET)], [np.zeros(0, np.int64)]
    for name, codes in (("VERTICES", (1, 2)), ("LINES", (3, 4)), ("POLYGONS", (5, 9, 7))):
        if name not in found.cells:
            continue
        indptr, flat = _rows(found.cells[name], None)
        size = np.diff(indptr) - (1, 2, 3)[codes[0] // 2]
        kinds.append(np.array(codes, KIND)[np.clip(size, 0, len(codes) - 1)])
        offsets.append(indptr[1:] + offsets[-1][-1])
        ids.append(flat)
    return RawMesh(
        points=found.points,
        kind=np.concatenate(kinds),
        indptr=np.concatenate(offsets),
        indices=narrow_ids(np.concatenate(ids), len(found.points)),
        cell_fields=found.cell_fields,
        point_fields=found.point_fields,
    )


def _rows(cells: CellArray, kind: Array | None) -> tuple[Int64Array, Array]:
    """Return CSR rows of either storage."""
    if cells.offsets is not None:
        indptr = cells.offsets.astype(OFFSET)
        if not len(indptr):
            return np.zeros(1, OFFSET), cells.ids
        if indptr[0] != 0 or indptr[-1] != len(cells.ids) or np.any(np.diff(indptr) < 0):
            raise FileError("its offsets do not fit its connectivity; it is damaged")
        return indptr, cells.ids
    start = _row_starts(cells, kind)
    size = cells.ids[start].astype(OFFSET)
    indptr = np.concatenate([np.zeros(1, OFFSET), np.cumsum(size)])
    is_count = np.zeros(len(cells.ids), bool)
    is_count[start] = True
    return indptr, cells.ids[~is_count]


def _row_starts(cells: CellArray, kind: Array | None) -> Int64Array:
    """Return where each counted row (size, ids) begins."""
    flat, n_rows = cells.ids, cells.n_rows
    if kind is not None:
        size = kind_tables().n_nodes[kind].astype(OFFSET)
        start = np.cumsum(size + 1) - (size + 1)
        fits = size.all() and size.sum() + n_rows == len(flat)
        if fits and np.array_equal(flat[start], size):
            return start
    starts, place, sizes = [], 0, flat.tolist()
    for _ in range(n_rows):
        if place >= len(sizes) or sizes[place] < 0:
            break
        starts.append(place)
        place += sizes[place] + 1
    if len(starts) != n_rows or place != len(sizes):
        raise FileError("the sizes of its cells do not fit their number; it is damaged")
    return np.array(starts, OFFSET)


def _with_polyhedra(found: LegacyFile, kind: Array, indptr: Int64Array, ids: Array) -> RawMesh:
    """Unpack polyhedra, whose rows are face streams, and hand everything over."""
    points = found.points if found.points is not None else np.zeros((0, 3))
    polyhedra = None
    is_polyhedron = kind == POLYHEDRON
    if is_polyhedron.any():
        start, stop = indptr[:-1][is_polyhedron], indptr[1:][is_polyhedron]
        polyhedra = unpack_face_stream(
            ids, start, stop, is_polyhedron=is_polyhedron, n_points=len(points)
        )
        indptr, ids = _own_points(polyhedra, indptr, ids, is_polyhedron)
    return RawMesh(
        points=points,
        kind=kind,
        indptr=indptr,
        indices=narrow_ids(ids, len(points)),
        polyhedra=polyhedra,
        cell_fields=found.cell_fields,
        point_fields=found.point_fields,
    )


def _own_points(
    polyhedra: Polyhedra, indptr: Int64Array, ids: Array, is_polyhedron: Array
) -> tuple[Int64Array, Array]:
    """Replace each face stream by the points of the polyhedron, each once."""
    n_cells = len(is_polyhedron)
    faces_of = np.repeat(np.arange(n_cells), np.diff(polyhedra.cell_indptr))
    owner = np.repeat(faces_of, np.diff(polyhedra.face_indptr))
    pairs = np.unique(np.column_stack([owner, polyhedra.face_indices]), axis=0)
    plain_indptr, plain_ids = select_rows(indptr, ids, ~is_polyhedron)
    plain_owner = np.repeat(np.flatnonzero(~is_polyhedron), np.diff(plain_indptr))
    owner = np.concatenate([pairs[:, 0], plain_owner])
    merged = np.concatenate([pairs[:, 1], plain_ids])
    order = np.argsort(owner, kind="stable")
    counts = np.bincount(owner, minlength=n_cells)
    return np.concatenate([np.zeros(1, OFFSET), np.cumsum(counts)]), merged[order]
