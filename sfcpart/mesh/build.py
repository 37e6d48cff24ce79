"""Steps of making a mesh: join blocks, set elements of lower dimension apart, check polyhedra."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import (
    KIND,
    OFFSET,
    Array,
    BoolArray,
    Int64Array,
    IntArray,
    KindArray,
    index_dtype,
)
from sfcpart.errors import MeshError
from sfcpart.mesh.gate import Block, as_array, check_fields, check_indices, check_offsets, frozen
from sfcpart.mesh.kinds import KINDS, POLYHEDRON, VERTEX
from sfcpart.mesh.pieces import BoundaryGroup, Polyhedra


def check_dim(dims: Sequence[int], n_columns: int) -> int:
    """Return the highest of the dimensions that occur, if it is 2 or 3 and points can hold it."""
    if not dims:
        raise MeshError("the mesh has no cells; wanted at least one cell of dimension 2 or 3")
    if max(dims) < 2:
        raise MeshError(
            f"the mesh has elements of dimension {max(dims)} at most; "
            "wanted cells of dimension 2 or 3"
        )
    if max(dims) > n_columns:
        raise MeshError("the mesh has cells of dimension 3, but points with 2 coordinates each")
    return max(dims)


def join(blocks: Sequence[Block], n_points: int) -> tuple[KindArray, Int64Array, IntArray]:
    """Put blocks one behind the other: kind, indptr, indices."""
    kind = np.repeat(np.array([b.kind.code for b in blocks], KIND), [b.n for b in blocks])
    parts = [_points_of(block, n_points) for block in blocks]
    if len(blocks) == 1:
        return frozen(kind), frozen(blocks[0].indptr), frozen(parts[0])
    start = np.cumsum([0, *(len(part) for part in parts)])
    pieces = [b.indptr[:-1] + s for b, s in zip(blocks, start[:-1], strict=True)]
    indptr = np.concatenate([*pieces, start[-1:]]).astype(OFFSET, copy=False)
    return frozen(kind), frozen(indptr), frozen(np.concatenate(parts))


def _points_of(block: Block, n_points: int) -> IntArray:
    """Check one block's points; messages name the block's kind."""
    try:
        return check_indices(block.flat, n_points, "point", block.indptr)
    except MeshError as error:
        raise MeshError(f"cells of kind {block.kind.name!r}: {error}") from None


def group(block: Block, n_points: int) -> BoundaryGroup:
    """Make a boundary group of a block of lower dimension, named by its kind."""
    kind = np.full(block.n, block.kind.code, KIND)
    flat = _points_of(block, n_points)
    return BoundaryGroup(block.kind.name, -1, frozen(kind), frozen(block.indptr), frozen(flat))


def groups_by_kind(
    kind: KindArray, indptr: Int64Array, indices: IntArray, chosen: BoolArray
) -> tuple[BoundaryGroup, ...]:
    """Make one boundary group of the chosen elements of each kind."""
    groups = []
    for code in np.unique(kind[chosen]):
        mine = chosen & (kind == code)
        offset, flat = take_rows(indptr, indices, mine)
        groups.append(BoundaryGroup(KINDS[int(code)].name, -1, frozen(kind[mine]), offset, flat))
    return tuple(groups)


def take_rows(indptr: Int64Array, indices: Array, chosen: BoolArray) -> tuple[Int64Array, IntArray]:
    """Keep the chosen rows of a CSR relation."""
    size = np.diff(indptr)
    offset = np.concatenate([[0], np.cumsum(size[chosen])]).astype(OFFSET, copy=False)
    return frozen(offset), frozen(indices[np.repeat(chosen, size)])


def cut_fields(fields: Mapping[str, ArrayLike] | None, belongs: BoolArray) -> Mapping[str, Array]:
    """Check cell fields; those with a row for every element are cut to the cells."""
    n = int(np.count_nonzero(belongs))
    if n == len(belongs) or not fields:
        return check_fields(fields, n, "cell")
    arrays = {name: np.asarray(values) for name, values in fields.items()}
    cut = {
        name: array[belongs] if array.ndim and len(array) == len(belongs) else array
        for name, array in arrays.items()
    }
    return check_fields(cut, n, "cell")


def polyhedra(blocks: Sequence[Block], n_points: int) -> Polyhedra | None:
    """Gather the faces of polyhedral blocks; rows of other cells stay empty."""
    if not any(block.faces is not None for block in blocks):
        return None
    cells = [faces for b in blocks for faces in (b.faces if b.faces is not None else [()] * b.n)]
    faces = [face for each in cells for face in each]
    cell_indptr = np.cumsum([0, *map(len, cells)], dtype=OFFSET)
    face_indptr = np.cumsum([0, *map(len, faces)], dtype=OFFSET)
    flat = np.concatenate([np.asarray(face) for face in faces]) if faces else np.empty(0, OFFSET)
    raw = Polyhedra(face_indptr, flat, cell_indptr, np.arange(len(faces)))
    kind = np.repeat([b.kind.code for b in blocks], [b.n for b in blocks])
    return check_polyhedra(raw, kind, n_points)


def cut_polyhedra(faces: Polyhedra | None, belongs: BoolArray) -> Polyhedra | None:
    """Leave out the rows of elements that are no cells."""
    if faces is None:
        return None
    indptr, indices = take_rows(faces.cell_indptr, np.asarray(faces.cell_indices), belongs)
    return Polyhedra(faces.face_indptr, faces.face_indices, indptr, indices)


def check_polyhedra(faces: Polyhedra | None, kind: Array, n_points: int) -> Polyhedra | None:
    """Check the faces of polyhedra and cast them to the dtype of the cells' points."""
    is_poly = kind == POLYHEDRON
    if not is_poly.any():
        return None
    if faces is None:
        bad = int(np.argmax(is_poly))
        raise MeshError(f"cell {bad} is a polyhedron; wanted `polyhedra` with its faces")
    n_faces = len(faces.face_indptr) - 1
    flat = as_array(faces.face_indices, "faces of polyhedra")
    rows = as_array(faces.cell_indices, "faces of polyhedra")
    face_indptr = check_offsets(faces.face_indptr, n_faces, len(flat), "faces")
    cell_indptr = check_offsets(faces.cell_indptr, len(kind), len(rows), "cells to faces")
    if n_faces and int(np.diff(face_indptr).min()) < 3:
        bad = int(np.argmin(np.diff(face_indptr)))
        raise MeshError(f"face {bad} of the polyhedra has fewer than 3 points")
    few = is_poly & (np.diff(cell_indptr) < 4)
    if few.any():
        bad = int(np.argmax(few))
        count = int(np.diff(cell_indptr)[bad])
        raise MeshError(f"cell {bad} (polyhedron) has {count} faces; wanted at least 4")
    dtype = index_dtype(n_points)
    return Polyhedra(
        face_indptr,
        frozen(check_indices(flat, n_points, "point", face_indptr)),
        cell_indptr,
        frozen(check_indices(rows, n_faces, "face", cell_indptr).astype(dtype, copy=False)),
    )


def check_face_cells(face_cell: ArrayLike, n_cells: int, *, first: int = 0) -> IntArray:
    """Check the two cells of each face; the absent cell goes second.

    `first` is the number of the first face, for messages.
    """
    pair = as_array(face_cell, "face_cell")
    if pair.size == 0:
        pair = np.empty((0, 2), index_dtype(n_cells))
    if pair.ndim != 2 or pair.shape[1] != 2 or pair.dtype.kind not in "iu":
        raise MeshError(
            f"face_cell has shape {pair.shape}, dtype {pair.dtype}; wanted (n_faces, 2) integers"
        )
    wrong = (pair.max(axis=1) < 0) | (pair[:, 0] == pair[:, 1])
    wrong |= (pair.min(axis=1) < -1) | (pair.max(axis=1) >= n_cells)
    if wrong.any():
        bad = int(np.argmax(wrong))
        raise MeshError(
            f"face {first + bad} joins cells {pair[bad].tolist()}; wanted two of the cells 0 to "
            f"{n_cells - 1}, or -1 as the second on the boundary"
        )
    pair = pair.astype(index_dtype(n_cells), copy=False)
    swapped = pair[:, 0] < 0
    if swapped.any():
        pair = np.where(swapped[:, None], pair[:, ::-1], pair)
    return frozen(pair)


def bare_cells(n_cells: int) -> dict[str, Any]:
    """Return the cell arrays of a mesh without points."""
    check_some_cells(n_cells)
    return {
        "points": None,
        "kind": frozen(np.full(n_cells, VERTEX, KIND)),
        "indptr": frozen(np.zeros(n_cells + 1, OFFSET)),
        "indices": frozen(np.empty(0, np.int32)),
    }


def check_some_cells(n_cells: int) -> None:
    """Refuse a mesh without cells."""
    if not n_cells:
        raise MeshError("the mesh has no cells; wanted at least one cell centre")
