"""The gate of the mesh: arrays are checked and cast here, once, with as few copies as can be.

Arrays that already have the right dtype are not copied but looked at through a read-only view.
Range checks run over the array as it came, so that no wide copy of the connectivity is made.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import (
    COORDINATE,
    KIND,
    OFFSET,
    Array,
    FloatArray,
    Int64Array,
    IntArray,
    KindArray,
    index_dtype,
)
from sfcpart.errors import MeshError
from sfcpart.mesh.kinds import KINDS, POLYGON, POLYHEDRON, Kind, kind_of, kind_tables

__all__ = [
    "Block",
    "check_fields",
    "check_indices",
    "check_kinds",
    "check_offsets",
    "check_positions",
    "check_sizes",
    "frozen",
    "parse_blocks",
]


@dataclass(frozen=True, eq=False)
class Block:
    """Cells of one kind as they came: CSR, with `faces` (nested lists) for polyhedra only."""

    kind: Kind
    n: int
    indptr: Int64Array
    flat: Array
    faces: Sequence[Sequence[Sequence[int]]] | None = None


def frozen(array: Array) -> Array:
    """Return a C-contiguous, read-only view (a copy only where the layout asks for one)."""
    view = np.ascontiguousarray(array).view()
    view.flags.writeable = False
    return view


def as_array(values: ArrayLike, what: str) -> Array:
    """Make an array of numbers in native byte order; refuse rows of unequal length and objects."""
    try:
        array = np.asarray(values)
    except ValueError:
        raise MeshError(f"{what}: rows of unequal length; wanted one array") from None
    if array.dtype.kind not in "biufc":
        raise MeshError(f"{what}: values of dtype {array.dtype}; wanted numbers")
    return array.astype(array.dtype.newbyteorder("="), copy=False)


def check_positions(positions: ArrayLike, what: str, *, first: int = 0) -> FloatArray:
    """Check finite coordinates in 2 or 3 columns.

    `what` names a row in messages ("point"), `first` is the number of the first.
    """
    array = as_array(positions, f"{what} coordinates")
    if array.dtype.kind not in "fiu":
        raise MeshError(f"{what} coordinates have dtype {array.dtype}; wanted real numbers")
    if array.ndim != 2 or array.shape[1] not in (2, 3):
        raise MeshError(f"{what} coordinates have shape {array.shape}; wanted (n, 2) or (n, 3)")
    array = array.astype(COORDINATE, copy=False)
    # min and max see NaN and infinities without a temporary array
    if array.size and not (np.isfinite(array.min()) and np.isfinite(array.max())):
        bad = int(np.flatnonzero(~np.isfinite(array).all(axis=1))[0])
        raise MeshError(
            f"{what} {first + bad} has coordinates {array[bad].tolist()}; wanted finite numbers: "
            f"repair or remove that {what}"
        )
    return frozen(array)


def check_sizes(sizes: ArrayLike, n_rows: int, what: str, *, first: int = 0) -> FloatArray:
    """Check measures: one finite number >= 0 a row; `first` is the number of the first."""
    array = as_array(sizes, f"measures of {what}s")
    if array.shape != (n_rows,) or array.dtype.kind not in "fiu":
        raise MeshError(
            f"measures of {what}s have shape {array.shape}, dtype {array.dtype}; "
            f"wanted {n_rows} real numbers"
        )
    array = array.astype(COORDINATE, copy=False)
    if array.size and not (array.min() >= 0 and np.isfinite(array.max())):
        bad = int(np.flatnonzero(~(np.isfinite(array) & (array >= 0)))[0])
        raise MeshError(
            f"{what} {first + bad} has measure {array[bad]}; wanted finite numbers >= 0"
        )
    return frozen(array)


def check_offsets(indptr: ArrayLike, n_rows: int, n_entries: int, what: str) -> Int64Array:
    """Check CSR offsets: n_rows + 1 integers that rise from 0 to n_entries."""
    array = as_array(indptr, f"offsets of {what}")
    if array.shape != (n_rows + 1,) or array.dtype.kind not in "iu":
        raise MeshError(
            f"offsets of {what} have shape {array.shape}, dtype {array.dtype}; "
            f"wanted {n_rows + 1} integers"
        )
    array = array.astype(OFFSET, copy=False)
    if array[0] != 0 or array[-1] != n_entries or (n_rows and int(np.diff(array).min()) < 0):
        raise MeshError(
            f"offsets of {what} go from {array[0]} to {array[-1]}; "
            f"wanted to rise from 0 to {n_entries} and never to fall"
        )
    return frozen(array)


def check_indices(flat: Array, n: int, what: str, indptr: Int64Array) -> IntArray:
    """Check that entries lie in 0..n-1 and cast them to the smallest index dtype."""
    if flat.dtype.kind not in "iu" or flat.ndim != 1:
        raise MeshError(
            f"{what}s are listed by {flat.dtype} values of shape {flat.shape}; wanted integers, "
            "one behind the other"
        )
    if flat.size and (int(flat.min()) < 0 or int(flat.max()) >= n):
        place = int(np.flatnonzero((flat < 0) | (flat >= n))[0])
        row = int(np.searchsorted(indptr, place, side="right")) - 1
        raise MeshError(f"row {row} lists {what} {flat[place]}; the mesh has {what}s 0 to {n - 1}")
    return flat.astype(index_dtype(n), copy=False)


def check_kinds(kind: ArrayLike, indptr: Int64Array, *, first: int = 0) -> KindArray:
    """Check that codes are known and each cell has as many points as its kind.

    `first` is the number of the first cell, for messages.
    """
    codes = as_array(kind, "kinds")
    if codes.ndim != 1 or codes.dtype.kind not in "iu":
        raise MeshError(f"kinds have shape {codes.shape}, dtype {codes.dtype}; wanted VTK codes")
    unknown = (codes < 0) | (codes > 255)
    codes = codes.astype(KIND, copy=False)
    tables = kind_tables()
    unknown |= tables.dim[codes] < 0
    if unknown.any():
        bad = int(np.flatnonzero(unknown)[0])
        raise MeshError(
            f"cell {first + bad} has VTK type {np.asarray(kind)[bad]}, which is not known; "
            f"known are {', '.join(map(str, KINDS))}"
        )
    width = np.diff(indptr)
    wanted = tables.n_nodes[codes]
    least = tables.n_corners.copy()
    least[[POLYGON, POLYHEDRON]] = 3, 4
    wrong = ((width != wanted) & (wanted > 0)) | (width < least[codes])
    if wrong.any():
        bad = int(np.flatnonzero(wrong)[0])
        name, many = KINDS[int(codes[bad])].name, wanted[bad] or f"at least {least[codes[bad]]}"
        raise MeshError(f"cell {first + bad} ({name}) has {width[bad]} points; wanted {many}")
    return frozen(codes)


def check_fields(fields: Mapping[str, ArrayLike] | None, n: int, what: str) -> Mapping[str, Array]:
    """Check that every field has `n` rows and freeze it."""
    checked: dict[str, Array] = {}
    for name, values in (fields or {}).items():
        array = np.asarray(values)
        array = array.astype(array.dtype.newbyteorder("="), copy=False)
        if array.ndim < 1 or len(array) != n:
            raise MeshError(
                f"{what} field {name!r} has shape {array.shape}; wanted {n} rows, one a {what}"
            )
        checked[str(name)] = frozen(array)
    return MappingProxyType(checked)


def parse_blocks(cells: Mapping[str, Any] | Iterable[tuple[str, Any]]) -> list[Block]:
    """Turn `{"tetra": array, ...}` or (name, connectivity) pairs into blocks; drop empty ones."""
    pairs = cells.items() if isinstance(cells, Mapping) else cells
    blocks = [_block(kind_of(name), rows) for name, rows in pairs]
    return [block for block in blocks if block.n]


def _block(kind: Kind, rows: Any) -> Block:
    """Read one block: a table, a ragged list, (indptr, indices), or lists of faces."""
    if kind.code == POLYHEDRON:
        return _polyhedra(kind, rows)
    if kind.code == POLYGON and not (isinstance(rows, np.ndarray) and rows.ndim == 2):
        return _ragged(kind, rows)
    table = as_array(rows, f"cells of kind {kind.name!r}")
    if table.size == 0:
        return Block(kind, 0, np.zeros(1, OFFSET), np.empty(0, np.int32))
    if table.ndim == 1 and kind.n_nodes == 1:
        table = table[:, None]
    wanted = kind.n_nodes or f"at least {kind.n_corners or 3}"
    width = table.shape[1] if table.ndim == 2 else -1
    if table.ndim != 2 or (kind.n_nodes and width != kind.n_nodes) or width < kind.n_corners:
        raise MeshError(
            f"cells of kind {kind.name!r} have shape {table.shape}; wanted (n, {wanted})"
        )
    indptr = np.arange(0, table.size + 1, width, dtype=OFFSET)
    return Block(kind, len(table), indptr, table.reshape(-1))


def _ragged(kind: Kind, rows: Any) -> Block:
    """Read polygons: a pair of flat arrays (indptr, indices), or one list of points a polygon."""
    if isinstance(rows, tuple) and len(rows) == 2 and all(np.ndim(part) == 1 for part in rows):
        flat = as_array(rows[1], "polygons")
        n = len(rows[0]) - 1
        indptr = check_offsets(rows[0], n, len(flat), "polygons")
    else:
        flat, indptr = _join_lists(rows, "polygons")
    size = np.diff(indptr)
    if len(size) and size.min() < 3:
        bad = int(np.argmin(size))
        raise MeshError(
            f"cells of kind 'polygon': row {bad} has {size[bad]} points; wanted at least 3"
        )
    return Block(kind, len(size), indptr, flat)


def _join_lists(lists: Sequence[Any], what: str) -> tuple[Array, Int64Array]:
    """Put lists of numbers one behind the other; return them with their offsets."""
    arrays = [as_array(each, what) for each in lists]
    if any(array.ndim != 1 for array in arrays):
        raise MeshError(f"{what}: wanted a list of points for each")
    indptr = np.cumsum([0, *map(len, arrays)], dtype=OFFSET)
    filled = [array for array in arrays if len(array)]
    return (np.concatenate(filled) if filled else np.empty(0, OFFSET)), indptr


def _polyhedra(kind: Kind, rows: Sequence[Sequence[Sequence[int]]]) -> Block:
    """Read polyhedra: for each cell a list of faces, for each face a list of points."""
    each = [np.unique(_join_lists(faces, "faces of polyhedra")[0]) for faces in rows]
    flat, indptr = _join_lists(each, "polyhedra")
    return Block(kind, len(each), indptr, flat, rows)
