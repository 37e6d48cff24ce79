"""Who sends which cells to whom, in HDF5: the group `/sfcpart` of `migration.h5`.

Attributes of the group: `format_version` (1), `n_old_parts`, `n_parts`, `n_cells` (of the mesh that
was split), `cell_bytes` (that a cell was taken to bring along).

Datasets (O old parts, P new parts, K pairs of an old part and another new one):

- `send_indptr` (O+1), `send_part` (K): old part p sends cells to the new parts
  `send_part[send_indptr[p]:send_indptr[p+1]]`, ascending; the row is the pair's number k;
- `cell_indptr` (K+1), `cell_gid`: pair k moves `cell_gid[cell_indptr[k]:cell_indptr[k+1]]`,
  ascending, numbered as in the mesh that was split;
- `receive_indptr` (P+1), `receive_pair` (K): to new part q the pairs
  `receive_pair[receive_indptr[q]:receive_indptr[q+1]]` bring cells, by old part;
- `receive_part` (K): the old part of each of these rows.

Cells that stay are in no list. A part reads its own rows only.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import OFFSET, PART, Int32Array, Int64Array
from sfcpart.errors import FileError, InputError
from sfcpart.files.hdf5 import create_hdf5, read_hdf5

if TYPE_CHECKING:
    from os import PathLike

__all__ = ["FORMAT_VERSION", "PartMoves", "read_moves", "write_moves"]

FORMAT_VERSION = 1
_GROUP = "sfcpart"


@dataclass(frozen=True, eq=False)
class PartMoves:
    """What one part sends and receives.

    Attributes
    ----------
    part, n_old_parts, n_parts : int
        This part; parts before and after.
    send_part : (k,) int32
        New parts that get cells from here, ascending.
    send_indptr, send_gid : (k + 1,) int64, (n,) int64
        Cells for each of them.
    receive_part : (m,) int32
        Old parts that cells come from, ascending.
    receive_indptr, receive_gid : (m + 1,) int64, (n,) int64
        Cells from each of them.
    """

    part: int
    n_old_parts: int
    n_parts: int
    send_part: Int32Array
    send_indptr: Int64Array
    send_gid: Int64Array
    receive_part: Int32Array
    receive_indptr: Int64Array
    receive_gid: Int64Array


def write_moves(
    path: str | PathLike[str],
    home_part: Int32Array,
    cell_part: Int32Array,
    *,
    n_old_parts: int,
    n_parts: int,
    cell_bytes: float,
) -> None:
    """Write the lists of all parts.

    Parameters
    ----------
    path : path
        The file to create.
    home_part, cell_part : (n_cells,) int32
        Part of each cell before and after.
    n_old_parts, n_parts : int
    cell_bytes : float

    Raises
    ------
    FileError
        If the file cannot be written.
    """
    moved = np.flatnonzero(home_part != cell_part)
    key = home_part[moved].astype(np.int64) * n_parts + cell_part[moved]
    order = np.argsort(key, kind="stable")
    pair, count = np.unique(key, return_counts=True)
    old, new = np.divmod(pair, n_parts)
    arrive = np.lexsort((old, new))
    with create_hdf5(path) as file:
        group = file.create_group(_GROUP)
        group.attrs["format_version"] = FORMAT_VERSION
        group.attrs["n_old_parts"] = n_old_parts
        group.attrs["n_parts"] = n_parts
        group.attrs["n_cells"] = len(cell_part)
        group.attrs["cell_bytes"] = float(cell_bytes)
        group["send_indptr"] = _rows_of(old, n_old_parts)
        group["send_part"] = new.astype(PART)
        group["cell_indptr"] = np.concatenate(([0], np.cumsum(count))).astype(OFFSET)
        group["cell_gid"] = moved[order].astype(np.int64)
        group["receive_indptr"] = _rows_of(new[arrive], n_parts)
        group["receive_pair"] = arrive.astype(np.int64)
        group["receive_part"] = old[arrive].astype(PART)


def _rows_of(ascending: Int64Array, count: int) -> Int64Array:
    """Return where the rows of each number begin, and their end."""
    return np.searchsorted(ascending, np.arange(count + 1)).astype(OFFSET)


def read_moves(path: str | PathLike[str], part: int) -> PartMoves:
    """Read what one part sends and receives in a re-split.

    Parameters
    ----------
    path : path
        `migration.h5`, or the folder that holds it.
    part : int
        Number of the part, before or after; a part that is new sends nothing, one that is given
        up receives nothing.

    Returns
    -------
    PartMoves

    Raises
    ------
    FileError
        If the file cannot be read, or is none of these.
    InputError
        If there is no such part.

    Notes
    -----
    O(cells of the part that move).

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_moves(
    ...         f"{folder}/migration.h5", np.array([0, 0, 1], np.int32),
    ...         np.array([0, 1, 1], np.int32), n_old_parts=2, n_parts=2, cell_bytes=200.0)
    ...     moves = read_moves(folder, 0)
    >>> moves.send_part.tolist(), moves.send_gid.tolist(), moves.receive_part.tolist()
    ([1], [1], [])
    """
    from pathlib import Path

    place = Path(path)
    place = place / "migration.h5" if place.is_dir() else place
    with read_hdf5(place) as file:
        if _GROUP not in file or "send_indptr" not in file[_GROUP]:
            raise FileError(f"{place}: holds no lists of moving cells; wanted a migration.h5")
        group = file[_GROUP]
        version = int(group.attrs["format_version"])
        if version != FORMAT_VERSION:
            raise FileError(f"{place}: is of version {version}; wanted {FORMAT_VERSION}")
        n_old, n_new = int(group.attrs["n_old_parts"]), int(group.attrs["n_parts"])
        if not 0 <= part < max(n_old, n_new):
            raise InputError(f"there is no part {part}; parts go from 0 to {max(n_old, n_new) - 1}")
        sends = _row(group["send_indptr"], part, n_old)
        comes = _row(group["receive_indptr"], part, n_new)
        from_pairs = group["receive_pair"][comes]
        sent = _cells(group, np.arange(sends.start, sends.stop))
        received = _cells(group, from_pairs)
        return PartMoves(
            part, n_old, n_new, group["send_part"][sends], *sent, group["receive_part"][comes],
            *received,
        )  # fmt: skip


def _row(indptr: Any, part: int, count: int) -> slice:
    """Return the rows of a part, none if it is beyond the count."""
    if part >= count:
        return slice(0, 0)
    return slice(int(indptr[part]), int(indptr[part + 1]))


def _cells(group: Any, pairs: Int64Array) -> tuple[Int64Array, Int64Array]:
    """Return the cells of some pairs, one pair after another, and where each begins."""
    rows = [(int(group["cell_indptr"][k]), int(group["cell_indptr"][k + 1])) for k in pairs]
    gids = [np.asarray(group["cell_gid"][a:b], np.int64) for a, b in rows]
    indptr = np.concatenate(([0], np.cumsum([b - a for a, b in rows]))).astype(OFFSET)
    return indptr, np.concatenate([np.empty(0, np.int64), *gids])
