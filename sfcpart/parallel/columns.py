"""Per-cell arrays to migrate, of fixed width or ragged, and what all ranks must give alike."""

from __future__ import annotations

import zlib
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import OFFSET, Array, Int64Array
from sfcpart.errors import InputError

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["Ragged", "check_bound", "checked_columns", "refuse_differences"]


class Ragged(NamedTuple):
    """Rows of different lengths, as in CSR: row i is `data[indptr[i]:indptr[i + 1]]`.

    Attributes
    ----------
    indptr : (n_local + 1,) int64
    data : (n_entries, ...) array

    Examples
    --------
    >>> faces = Ragged(np.array([0, 2, 3]), np.array([7, 8, 9]))
    >>> faces.data[faces.indptr[0] : faces.indptr[1]].tolist()
    [7, 8]
    """

    indptr: Int64Array
    data: Array


def checked_columns(
    arrays: Mapping[str, Any], destination: ArrayLike, order_by: str | None, size: int
) -> tuple[dict[str, Array | Ragged], Int64Array]:
    """Return well-formed columns and destinations."""
    goal = np.asarray(destination)
    if goal.size == 0:
        goal = goal.astype(np.int64)
    if goal.ndim != 1 or goal.dtype.kind not in "iu":
        raise InputError(
            f"destination is {goal.dtype} of shape {goal.shape}; wanted a rank for each cell"
        )
    outside = np.flatnonzero((goal < 0) | (goal >= size))
    if len(outside):
        raise InputError(
            f"cell {outside[0]} goes to rank {goal[outside[0]]}; ranks go from 0 to {size - 1}"
        )
    columns = {name: _column(name, value, len(goal)) for name, value in arrays.items()}
    key = columns.get(order_by) if order_by is not None else None
    if order_by is not None and (
        not isinstance(key, np.ndarray) or key.ndim != 1 or key.dtype.kind not in "iu"
    ):
        raise InputError(
            f"order_by is {order_by!r}; wanted the name of a whole-number array among "
            f"{', '.join(map(repr, columns)) or 'none'}"
        )
    return columns, goal.astype(np.int64, copy=False)


def _column(name: str, value: Any, n_local: int) -> Array | Ragged:
    """Return an array or a ragged one, contiguous and in native byte order."""
    if not isinstance(value, tuple):
        return _rows(name, value, n_local)
    if len(value) != 2:
        raise InputError(f"array {name!r} is a tuple of {len(value)}; wanted (indptr, data)")
    indptr = np.asarray(value[0])
    data = _rows(name, value[1], None)
    if indptr.shape != (n_local + 1,) or indptr.dtype.kind not in "iu":
        raise InputError(
            f"indptr of {name!r} is {indptr.dtype} of shape {indptr.shape}; wanted whole numbers, "
            f"one more than the {n_local} cells"
        )
    indptr = indptr.astype(OFFSET, copy=False)
    if indptr[0] != 0 or indptr[-1] != len(data) or np.any(indptr[1:] < indptr[:-1]):
        raise InputError(
            f"indptr of {name!r} goes from {indptr[0]} to {indptr[-1]} for {len(data)} entries; "
            "wanted it to rise from 0 to their number"
        )
    return Ragged(indptr, data)


def _rows(name: str, value: Any, n_rows: int | None) -> Array:
    """Return rows that can be copied as bytes."""
    array = np.asarray(value)
    if array.ndim == 0 or array.dtype.hasobject:
        raise InputError(f"array {name!r} is no array of rows of a fixed-size dtype")
    if n_rows is not None and len(array) != n_rows:
        raise InputError(
            f"array {name!r} has {len(array)} rows; wanted one for each of the {n_rows} cells"
        )
    return np.ascontiguousarray(array, array.dtype.newbyteorder("="))


def check_bound(chunk_bytes: object) -> None:
    """Refuse a bound on memory that is none."""
    whole = isinstance(chunk_bytes, int | np.integer) and not isinstance(chunk_bytes, bool)
    if not whole or chunk_bytes < 1:  # type: ignore[operator]  # a number, as just checked
        raise InputError(f"chunk_bytes is {chunk_bytes!r}; wanted a whole number, 1 or more")


def refuse_differences(
    columns: Mapping[str, Array | Ragged], order_by: str | None, chunk_bytes: int, comm: Comm
) -> None:
    """Raise on all ranks if some rank gave other arrays than rank 0 (compared by a checksum)."""
    spelled = "; ".join(_form(name, column) for name, column in columns.items())
    spelled = f"{spelled} by {order_by} in {chunk_bytes}"
    mark = zlib.crc32(spelled.encode())
    first = int(comm.bcast(np.array([mark], np.int64))[0])
    error = None
    if mark != first:
        error = InputError(
            f"rank {comm.rank} migrates {spelled}, rank 0 something else; "
            "wanted the same names, dtypes, trailing shapes and options everywhere"
        )
    comm.check(error)


def _form(name: str, column: Array | Ragged) -> str:
    """Describe what all ranks must give alike."""
    rows = column.data if isinstance(column, Ragged) else column
    kind = "ragged " if isinstance(column, Ragged) else ""
    return f"{kind}{name!r} {rows.dtype.descr if rows.dtype.names else rows.dtype} {rows.shape[1:]}"
