"""Files that all ranks write to: rank 0 lays them out, then ranks write their rows in turn.

Every row has its place in the file before anybody writes, so the bytes do not depend on who writes
what, or when. In its turn a rank opens the file, writes, and closes it before the next one opens
it, which every file system that several nodes share understands. An error on one rank is raised
on all of them.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import Array
from sfcpart.errors import FileError
from sfcpart.files.hdf5 import create_hdf5, extend_hdf5, reserve_rows
from sfcpart.slices.gate import agreed

__all__ = ["Column", "SharedHdf5", "Table", "write_in_turn"]


def write_in_turn(path: Path, pieces: Sequence[tuple[int, Array]], comm: Comm) -> None:
    """Write arrays to their places in a file that is there already (collective).

    Parameters
    ----------
    path : pathlib.Path
    pieces : sequence of (offset in bytes, C-contiguous array)
    comm : Comm

    Raises
    ------
    FileError
        If some rank cannot write; on all ranks.
    """

    def write(token: Array) -> Array:
        _write_pieces(path, pieces)
        return token

    comm.relay(np.zeros(0, np.int64), write, towards="last")


def _write_pieces(path: Path, pieces: Sequence[tuple[int, Array]]) -> None:
    """Write all bytes, and have them on the disk when another rank may open the file."""
    if not pieces:
        return
    try:
        file = os.open(path, os.O_WRONLY)
        try:
            for offset, array in pieces:
                left = array.reshape(-1).view(np.uint8).data
                while len(left):
                    done = os.pwrite(file, left, offset)
                    left, offset = left[done:], offset + done
        finally:
            os.close(file)
    except OSError as error:
        raise FileError(f"{path}: cannot be written: {error.strerror or error}") from error


class Table(NamedTuple):
    """A dataset to be laid out: its name in the file, rows, dtype, and the shape of a row."""

    name: str
    n_rows: int
    dtype: Any
    width: tuple[int, ...] = ()
    attributes: tuple[tuple[str, Any], ...] = ()


class Column:
    """A rank's rows of one dataset, filled from the front."""

    def __init__(self, pending: list[tuple[int, Array]], dtype: Any, offset: int) -> None:
        self._pending, self._dtype, self._at = pending, np.dtype(dtype), offset

    def append(self, rows: Array) -> None:
        """Take the next rows; they are written when ranks take turns."""
        if rows.size:
            array = np.ascontiguousarray(rows, self._dtype)
            self._pending.append((self._at, array))
            self._at += array.nbytes


class SharedHdf5:
    """An HDF5 file that rank 0 lays out and all ranks fill.

    Parameters
    ----------
    path : path
    comm : Comm
    """

    def __init__(self, path: Path, comm: Comm) -> None:
        self.path, self.comm = path, comm
        self._open: Callable[[Path], Any] = create_hdf5
        self._places: dict[str, int] = {}
        self._tables: dict[str, Table] = {}
        self._pending: list[tuple[int, Array]] = []

    def lay_out(self, tables: Sequence[Table], begin: Callable[[Any], None]) -> None:
        """Make datasets without values, after `begin(file)` (collective; rank 0 does it)."""
        places = agreed(
            self.comm, lambda: self._made(tables, begin) if self.comm.rank == 0 else None
        )
        self._open = extend_hdf5
        self._tables |= {table.name: table for table in tables}
        self._places |= self.comm.bcast_object(places)

    def _made(self, tables: Sequence[Table], begin: Callable[[Any], None]) -> dict[str, int]:
        """Make the datasets; return where they begin."""
        places = {}
        with self._open(self.path) as file:
            begin(file)
            for table in tables:
                shape = (table.n_rows, *table.width)
                dataset, places[table.name] = reserve_rows(file, table.name, shape, table.dtype)
                for key, value in table.attributes:
                    dataset.attrs[key] = value
        return places

    def column(self, name: str, first: int) -> Column:
        """Return this rank's rows of a dataset, which begin with row `first`."""
        table = self._tables[name]
        row_bytes = np.dtype(table.dtype).itemsize * int(np.prod(table.width, dtype=np.int64))
        return Column(self._pending, table.dtype, self._places[name] + first * row_bytes)

    def flush(self) -> None:
        """Write what all ranks have appended (collective)."""
        write_in_turn(self.path, self._pending, self.comm)
        self._pending.clear()
