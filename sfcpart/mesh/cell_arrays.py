"""Cells as kernels take them: arrays of the mesh beside the tables of kinds."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import KIND, OFFSET, Int64Array, IntArray, KindArray
from sfcpart.mesh.gate import frozen
from sfcpart.mesh.kinds import KINDS, POLYHEDRON, kind_tables
from sfcpart.mesh.pieces import Polyhedra

if TYPE_CHECKING:
    from sfcpart.kernels.mesh.cells import CellArrays

__all__ = ["bundle", "most_corners", "spell_out"]


def bundle(
    kind: KindArray, indptr: Int64Array, indices: IntArray, faces: Polyhedra | None
) -> CellArrays:
    """Bundle the cells with the tables of kinds."""
    from sfcpart.kernels.mesh.cells import CellArrays

    tables = kind_tables()
    none, one = frozen(np.empty(0, indices.dtype)), frozen(np.zeros(1, OFFSET))
    return CellArrays(
        kind,
        indptr,
        indices,
        tables.n_corners,
        tables.face_count,
        tables.face_size,
        tables.face_corner,
        faces.cell_indptr if faces else one,
        faces.cell_indices if faces else none,
        faces.face_indptr if faces else one,
        faces.face_indices if faces else none,
    )


def most_corners(cells: CellArrays) -> int:
    """Bound the points of a cell and the faces of a polyhedron."""
    most = int(np.diff(cells.indptr).max(initial=0))
    return max(most, int(np.diff(cells.poly_cell_indptr).max(initial=0)))


def spell_out(cells: CellArrays) -> CellArrays:
    """Write cells of kinds with faces of more than four corners (prisms) as polyhedra."""
    wide = cells.face_size.max(axis=1)[cells.kind] > 4
    if not wide.any():
        return cells
    size = np.diff(cells.poly_cell_indptr) if len(cells.poly_cell_indptr) > 1 else 0 * cells.kind
    rows = [cells.poly_cell_indices]
    flat, lengths = [cells.poly_face_indices], [np.diff(cells.poly_face_indptr)]
    n_faces = len(cells.poly_face_indptr) - 1
    count = np.where(wide, cells.face_count[cells.kind], size).astype(OFFSET)
    owner = [np.repeat(np.arange(len(cells.kind)), size)]
    for code in np.unique(cells.kind[wide]).tolist():
        mine = np.flatnonzero(cells.kind == code)
        for corner in KINDS[code].faces:
            flat.append(cells.indices[cells.indptr[mine, None] + np.array(corner)].reshape(-1))
            lengths.append(np.full(len(mine), len(corner)))
            rows.append(np.arange(n_faces, n_faces + len(mine)))
            owner.append(mine)
            n_faces += len(mine)
    by_cell = np.argsort(np.concatenate(owner), kind="stable")
    dtype = cells.indices.dtype
    return cells._replace(
        kind=frozen(np.where(wide, POLYHEDRON, cells.kind).astype(KIND)),
        poly_cell_indptr=frozen(np.concatenate([[0], np.cumsum(count)])),
        poly_cell_indices=frozen(np.concatenate(rows)[by_cell].astype(dtype)),
        poly_face_indptr=frozen(np.concatenate([[0], np.cumsum(np.concatenate(lengths))])),
        poly_face_indices=frozen(np.concatenate(flat)),
    )
