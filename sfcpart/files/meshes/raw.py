"""What a reader of one format hands over: all elements of a file, in file order, unchecked.

`sfcpart.files.meshes.assemble` makes a mesh of it. Here are the operations readers share: keep some
elements, join pieces.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from sfcpart.dtypes import OFFSET, Array, BoolArray, Int64Array, IntArray, index_dtype
from sfcpart.errors import MeshError
from sfcpart.mesh.kinds import POLYHEDRON
from sfcpart.mesh.mesh import Polyhedra

__all__ = [
    "RawMesh",
    "check_ids",
    "check_piece",
    "check_rows",
    "concatenate",
    "join_pieces",
    "join_points",
    "narrow_ids",
    "select_rows",
    "take_elements",
    "without_ghosts",
]


@dataclass
class RawMesh:
    """Everything one file holds, in file order, before checks.

    Attributes
    ----------
    points : (n_points, 2 or 3) float
    kind : (n,) uint8
        VTK code of every element, also of those of lower dimension.
    indptr, indices : CSR
        Points of each element in VTK order.
    polyhedra : Polyhedra or None
        With one row for each element.
    cell_fields, point_fields : dict of str to array
    names : dict of (dimension, tag) to str
        What the file calls a tag.
    sets : dict of str to (k,) int64
        Named sets of elements.
    """

    points: Array
    kind: Array
    indptr: Int64Array
    indices: IntArray
    polyhedra: Polyhedra | None = None
    cell_fields: dict[str, Array] = field(default_factory=dict)
    point_fields: dict[str, Array] = field(default_factory=dict)
    names: dict[tuple[int, int], str] = field(default_factory=dict)
    sets: dict[str, Int64Array] = field(default_factory=dict)


def take_elements(raw: RawMesh, keep: BoolArray) -> RawMesh:
    """Return the elements where `keep` is true, with their points' ids and fields unchanged."""
    indptr, indices = select_rows(raw.indptr, raw.indices, keep)
    polyhedra = None
    if raw.polyhedra is not None and np.any(raw.kind[keep] == POLYHEDRON):
        polyhedra = _take_polyhedra(raw.polyhedra, keep)
    fields = {n: v[keep] for n, v in raw.cell_fields.items() if len(v) == len(keep)}
    place = np.cumsum(keep, dtype=np.int64) - 1
    sets = {name: place[ids[keep[ids]]] for name, ids in raw.sets.items()}
    return replace(
        raw,
        kind=raw.kind[keep],
        indptr=indptr,
        indices=indices,
        polyhedra=polyhedra,
        cell_fields=fields,
        sets=sets,
    )


def select_rows(
    indptr: Int64Array, indices: IntArray, keep: BoolArray
) -> tuple[Int64Array, IntArray]:
    """Return the rows of a CSR relation where `keep` is true."""
    count = np.diff(indptr)
    kept = np.zeros(int(keep.sum()) + 1, OFFSET)
    np.cumsum(count[keep], out=kept[1:])
    return kept, indices[np.repeat(keep, count)]


def join_pieces(raw: RawMesh, n_pieces: int, source: str) -> RawMesh:
    """Make one mesh of concatenated pieces: no ghosts, points joined by their global ids.

    Without a point field `GlobalPointIds` the points of the pieces stay separate.
    """
    ids = raw.point_fields.get("GlobalPointIds")
    if n_pieces > 1 and ids is not None and ids.dtype.kind in "iu":
        raw = join_points(raw, ids.reshape(-1), source)
    return without_ghosts(raw)


def without_ghosts(raw: RawMesh) -> RawMesh:
    """Drop the elements that `vtkGhostType` marks as copies of another piece's (bit 1)."""
    ghost = raw.cell_fields.get("vtkGhostType")
    if ghost is None or len(ghost) != len(raw.kind) or ghost.dtype.kind not in "iu":
        return raw
    keep = (ghost.reshape(len(ghost), -1)[:, 0] & 1) == 0
    fields = {name: values for name, values in raw.cell_fields.items() if name != "vtkGhostType"}
    raw = replace(raw, cell_fields=fields)
    return raw if keep.all() else take_elements(raw, keep)


def join_points(raw: RawMesh, point_gid: Array, source: str) -> RawMesh:
    """Make one point of all points with the same global id, in ascending order of the ids.

    Raises
    ------
    MeshError
        If two points with one id lie at different places.
    """
    gid, first, place = np.unique(point_gid, return_index=True, return_inverse=True)
    place = place.reshape(-1).astype(index_dtype(len(gid)))
    points = raw.points[first]
    apart = np.any((points[place] != raw.points) & ~np.isnan(raw.points), axis=1)
    if apart.any():
        bad = int(np.flatnonzero(apart)[0])
        raise MeshError(
            f"{source}: point {bad} and point {first[place[bad]]} share global id "
            f"{point_gid[bad]}, but lie at {raw.points[bad]} and {points[place[bad]]}"
        )
    polyhedra = raw.polyhedra
    if polyhedra is not None:
        polyhedra = replace(polyhedra, face_indices=place[polyhedra.face_indices])
    fields = {n: v[first] for n, v in raw.point_fields.items() if len(v) == len(place)}
    return replace(
        raw, points=points, indices=place[raw.indices], polyhedra=polyhedra, point_fields=fields
    )


def concatenate(parts: Sequence[RawMesh], source: str) -> RawMesh:
    """Join pieces one after the other; points stay separate, fields in all pieces are kept.

    Raises
    ------
    MeshError
        If a piece names a point it does not have.
    """
    for part in parts:
        check_piece(part, source)
    if len(parts) == 1:
        return parts[0]
    points = np.concatenate([_three_columns(part.points) for part in parts])
    first = np.cumsum([0, *(len(part.points) for part in parts)]).tolist()
    return RawMesh(
        points=points,
        kind=np.concatenate([part.kind for part in parts]),
        indptr=_join_indptr([part.indptr for part in parts]),
        indices=_join_ids([part.indices for part in parts], first),
        polyhedra=_join_polyhedra(parts, first),
        cell_fields=_join_fields([part.cell_fields for part in parts]),
        point_fields=_join_fields([part.point_fields for part in parts]),
    )


def check_piece(raw: RawMesh, source: str) -> None:
    """Check what the operations of this module rely on: offsets that ascend, ids in range."""
    check_rows(raw.indptr, raw.indices, f"{source}: cells")
    check_ids(raw.indptr, raw.indices, len(raw.points), source)
    faces = raw.polyhedra
    if faces is not None:
        check_rows(faces.cell_indptr, faces.cell_indices, f"{source}: polyhedra")
        check_rows(faces.face_indptr, faces.face_indices, f"{source}: faces of polyhedra")
        check_ids(faces.face_indptr, faces.face_indices, len(raw.points), source)
        ids, n_faces = faces.cell_indices, len(faces.face_indptr) - 1
        if len(ids) and (ids.min() < 0 or ids.max() >= n_faces):
            raise MeshError(f"{source}: polyhedra name faces that are not there ({n_faces} are)")


def check_rows(indptr: Int64Array, indices: IntArray, what: str) -> None:
    """Check that offsets ascend from 0 and end where the data end."""
    if indptr[0] != 0 or indptr[-1] != len(indices) or np.any(indptr[1:] < indptr[:-1]):
        raise MeshError(f"{what}: offsets do not ascend from 0 to {len(indices)}; it is damaged")


def check_ids(indptr: Int64Array, indices: IntArray, n_points: int, source: str) -> None:
    """Check that every point id names a point."""
    if len(indices) and (indices.min() < 0 or indices.max() >= n_points):
        bad = int(np.flatnonzero((indices < 0) | (indices >= n_points))[0])
        row = int(np.searchsorted(indptr, bad, side="right")) - 1
        raise MeshError(
            f"{source}: element {row} names point {indices[bad]}; "
            f"there are {n_points} points, 0 to {n_points - 1}"
        )


def narrow_ids(ids: Array, bound: int) -> IntArray:
    """Cast ids to int32 where `bound` fits, moving wrong ones to -1 instead of wrapping them."""
    dtype = index_dtype(bound)
    if ids.dtype == dtype:
        return ids
    if len(ids) and (ids.min() < 0 or ids.max() >= bound):
        ids = np.where((ids < 0) | (ids >= bound), -1, ids)
    return ids.astype(dtype)


def _three_columns(points: Array) -> Array:
    """Append zeros to points in the plane."""
    if points.ndim == 2 and points.shape[1] == 2:
        return np.column_stack([points, np.zeros(len(points), points.dtype)])
    return points


def _join_indptr(parts: Sequence[Int64Array]) -> Int64Array:
    """Concatenate CSR row pointers."""
    counts = np.concatenate([np.diff(indptr) for indptr in parts])
    joined = np.zeros(len(counts) + 1, OFFSET)
    np.cumsum(counts, out=joined[1:])
    return joined


def _join_fields(parts: Sequence[Mapping[str, Array]]) -> dict[str, Array]:
    """Concatenate the fields that all pieces have in one shape."""
    joined = {}
    for name, values in parts[0].items():
        pieces = [part.get(name) for part in parts]
        if all(p is not None and p.shape[1:] == values.shape[1:] for p in pieces):
            joined[name] = np.concatenate([p for p in pieces if p is not None])
    return joined


def _join_ids(parts: Sequence[IntArray], first: Sequence[int]) -> IntArray:
    """Concatenate ids, those of piece i raised by `first[i]`; `first` ends with the total."""
    dtype = index_dtype(first[-1])
    joined = np.zeros(sum(len(ids) for ids in parts), dtype)
    at = 0
    for ids, shift in zip(parts, first, strict=False):
        np.add(ids, shift, out=joined[at : at + len(ids)], casting="unsafe")
        at += len(ids)
    return joined


def _join_polyhedra(parts: Sequence[RawMesh], first: Sequence[int]) -> Polyhedra | None:
    """Concatenate polyhedra; pieces without any get empty rows."""
    if all(part.polyhedra is None for part in parts):
        return None
    blocks = [part.polyhedra or _no_polyhedra(len(part.kind)) for part in parts]
    face_first = np.cumsum([0, *(len(block.face_indptr) - 1 for block in blocks)]).tolist()
    return Polyhedra(
        face_indptr=_join_indptr([block.face_indptr for block in blocks]),
        face_indices=_join_ids([block.face_indices for block in blocks], first),
        cell_indptr=_join_indptr([block.cell_indptr for block in blocks]),
        cell_indices=_join_ids([block.cell_indices for block in blocks], face_first),
    )


def _no_polyhedra(n_rows: int) -> Polyhedra:
    """Return empty rows."""
    ids = np.zeros(0, np.int32)
    return Polyhedra(np.zeros(1, OFFSET), ids, np.zeros(n_rows + 1, OFFSET), ids)


def _take_polyhedra(polyhedra: Polyhedra, keep: BoolArray) -> Polyhedra:
    """Keep the faces that the kept cells use."""
    cell_indptr, cell_indices = select_rows(polyhedra.cell_indptr, polyhedra.cell_indices, keep)
    used = np.zeros(len(polyhedra.face_indptr) - 1, bool)
    used[cell_indices] = True
    face_indptr, face_indices = select_rows(polyhedra.face_indptr, polyhedra.face_indices, used)
    new_face: IntArray = (np.cumsum(used) - 1).astype(index_dtype(len(used)))
    return Polyhedra(face_indptr, face_indices, cell_indptr, new_face[cell_indices])
