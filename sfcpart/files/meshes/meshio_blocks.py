"""Turn meshio's blocks of cells into elements in file order, with tags, names and sets kept."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from sfcpart.dtypes import KIND, OFFSET, Array, Int64Array, IntArray, index_dtype
from sfcpart.errors import MeshError
from sfcpart.files.meshes.raw import RawMesh, narrow_ids
from sfcpart.mesh.kinds import POLYHEDRON, kind_of
from sfcpart.mesh.mesh import Polyhedra

__all__ = ["WEDGE", "raw_of_meshio"]

# meshio keeps the base triangle of a wedge so that it points inward, VTK so that it points
# outward (VTK file formats, linear cell types).
WEDGE = (0, 2, 1, 3, 5, 4)


def raw_of_meshio(mesh: Any) -> RawMesh:
    """Turn a meshio mesh into elements in file order.

    Raises
    ------
    MeshError
        If a block is of a kind that cannot be used, or has a wrong shape.
    """
    points = np.asarray(mesh.points)
    blocks = [_block(cells.type, cells.data, len(points)) for cells in mesh.cells]
    sizes = [len(indptr) - 1 for _, indptr, _ in blocks]
    kind = np.repeat(np.array([code for code, _, _ in blocks], KIND), sizes)
    first = np.cumsum([0, *sizes]).tolist()
    return RawMesh(
        points=points,
        kind=kind,
        indptr=_chained([indptr for _, indptr, _ in blocks]),
        indices=_joined([ids for _, _, ids in blocks], len(points)),
        polyhedra=_polyhedra(mesh.cells, len(points)),
        cell_fields=_cell_fields(mesh.cell_data, sizes),
        point_fields={name: np.asarray(values) for name, values in mesh.point_data.items()},
        names=_names(mesh),
        sets=_sets(mesh.cell_sets, first),
    )


def _block(name: str, data: Any, n_points: int) -> tuple[int, Int64Array, IntArray]:
    """Return code, offsets and ids of one block."""
    try:
        code = kind_of(name).code
    except MeshError:
        raise MeshError(f"holds {len(data)} cells of kind {name!r}, which cannot be used") from None
    if code == POLYHEDRON:
        return code, *_points_of_polyhedra(data, n_points)
    table = np.asarray(data)
    if table.ndim == 1 and len(table) == 0:
        table = table.reshape(0, 1)
    if table.ndim != 2 or table.dtype.kind not in "iu":
        raise MeshError(
            f"cells of kind {name!r} have shape {table.shape} and dtype {table.dtype}; "
            f"wanted a table of point ids"
        )
    if name == "wedge" and table.shape[1] == len(WEDGE):
        table = table[:, WEDGE]
    indptr = np.arange(0, table.size + 1, max(table.shape[1], 1), dtype=OFFSET)
    return code, indptr, narrow_ids(table.reshape(-1), n_points)


def _points_of_polyhedra(data: Any, n_points: int) -> tuple[Int64Array, IntArray]:
    """Return the points of each polyhedron, each once."""
    each = [np.unique(np.concatenate([np.asarray(face) for face in faces])) for faces in data]
    indptr = np.cumsum([0, *(len(ids) for ids in each)]).astype(OFFSET)
    return indptr, narrow_ids(np.concatenate([*each, np.zeros(0, np.int64)]), n_points)


def _polyhedra(blocks: Any, n_points: int) -> Polyhedra | None:
    """Return the faces of all polyhedra, with empty rows for other elements."""
    if not any(block.type.startswith("polyhedron") for block in blocks):
        return None
    faces: list[Array] = []
    per_cell: list[int] = []
    for block in blocks:
        if not block.type.startswith("polyhedron"):
            per_cell += [0] * len(block.data)
            continue
        for cell in block.data:
            per_cell.append(len(cell))
            faces += [np.asarray(face).reshape(-1) for face in cell]
    indices = np.concatenate([*faces, np.zeros(0, np.int64)])
    return Polyhedra(
        face_indptr=np.cumsum([0, *(len(face) for face in faces)]).astype(OFFSET),
        face_indices=narrow_ids(indices, n_points),
        cell_indptr=np.cumsum([0, *per_cell]).astype(OFFSET),
        cell_indices=np.arange(len(faces), dtype=index_dtype(len(faces))),
    )


def _chained(parts: Sequence[Int64Array]) -> Int64Array:
    """Chain the offsets of blocks."""
    if len(parts) == 1:
        return parts[0]
    widths = np.concatenate([np.zeros(1, OFFSET), *(np.diff(part) for part in parts)])
    return np.cumsum(widths)


def _joined(parts: Sequence[IntArray], n_points: int) -> IntArray:
    """Join the ids of blocks; a single block is not copied."""
    if len(parts) == 1:
        return parts[0]
    joined: IntArray = np.concatenate([np.zeros(0, index_dtype(n_points)), *parts])
    return joined


def _cell_fields(cell_data: Mapping[str, Any], sizes: Sequence[int]) -> dict[str, Array]:
    """Join the fields that have one shape in all blocks."""
    fields = {}
    for name, values in cell_data.items():
        pieces = [np.asarray(piece) for piece in values]
        shapes = {piece.shape[1:] for piece in pieces}
        if [len(piece) for piece in pieces] == list(sizes) and len(shapes) == 1:
            fields[name] = pieces[0] if len(pieces) == 1 else np.concatenate(pieces)
    return fields


def _names(mesh: Any) -> dict[tuple[int, int], str]:
    """Return what the file calls its tags: physical names, families, boundary names."""
    names = {}
    for name, value in mesh.field_data.items():
        pair = np.asarray(value)
        if pair.shape == (2,) and pair.dtype.kind in "iu":
            names[int(pair[1]), int(pair[0])] = str(name)
    for tag, called in getattr(mesh, "cell_tags", {}).items():
        for dim in range(4):
            names[dim, int(tag)] = ", ".join(map(str, called))
    return names


def _sets(cell_sets: Mapping[str, Any], first: Sequence[int]) -> dict[str, Int64Array]:
    """Return named sets as ids of elements in file order."""
    sets = {}
    for name, per_block in cell_sets.items():
        if name.startswith("gmsh:") or len(per_block) != len(first) - 1:
            continue
        ids = [np.zeros(0, np.int64)]
        for members, start, stop in zip(per_block, first, first[1:], strict=False):
            local = np.asarray(members if members is not None else [], np.int64).reshape(-1)
            ids.append(local[(local >= 0) & (local < stop - start)] + start)
        sets[name] = np.concatenate(ids)
    return sets
