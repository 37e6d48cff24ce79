"""Figures as files: one row a part as CSV, everything as JSON, one label a cell as .npy."""

from __future__ import annotations

import csv
import json
import math
from collections.abc import Mapping, Sequence
from io import BytesIO
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import SerialComm
from sfcpart.dtypes import PART
from sfcpart.errors import FileError, InputError
from sfcpart.files.parts.turns import write_in_turn
from sfcpart.slices.gate import agreed

if TYPE_CHECKING:
    from os import PathLike

    from sfcpart.comm.base import Comm
    from sfcpart.partition import Partition

__all__ = ["json_text", "write_cell_part", "write_part_table", "write_summary"]


def write_part_table(path: str | PathLike[str], columns: Mapping[str, ArrayLike]) -> None:
    """Write one row a part as CSV, the part's number first.

    Parameters
    ----------
    path : path
        The file, replaced if it exists.
    columns : mapping of str to (n_parts,) array
        As `Assessment.part`. What is not a finite number becomes an empty field.

    Raises
    ------
    InputError
        If the columns differ in length.
    FileError
        If the file cannot be written.
    """
    table = {name: np.asarray(column) for name, column in columns.items() if name != "part"}
    lengths = {name: len(column) for name, column in table.items()}
    if len(set(lengths.values())) > 1:
        raise InputError(f"the columns have {lengths} rows; wanted one row a part in each")
    n_parts = next(iter(lengths.values()), 0)
    try:
        with Path(path).open("w", encoding="utf-8", newline="") as file:
            writer = csv.writer(file, lineterminator="\n")
            writer.writerow(["part", *table])
            columns_of = [[_plain(value) for value in column] for column in table.values()]
            writer.writerows(zip(range(n_parts), *columns_of, strict=True))
    except OSError as error:
        raise _cannot(path, error) from error


def write_summary(path: str | PathLike[str], summary: Mapping[str, Any]) -> None:
    """Write figures as JSON: keys in the given order, null for what is not a finite number.

    Raises
    ------
    InputError
        If a value has no form in JSON.
    FileError
        If the file cannot be written.
    """
    text = json_text(summary)
    try:
        Path(path).write_text(text, encoding="utf-8")
    except OSError as error:
        raise _cannot(path, error) from error


def write_cell_part(
    path: str | PathLike[str], partition: Partition, *, comm: Comm | None = None
) -> None:
    """Write the part of each cell, in the file order of the mesh, as a .npy array of int32.

    Parameters
    ----------
    path : path
        The file, replaced if it exists.
    partition : Partition
        Of this rank's cells.
    comm : Comm, optional
        Ranks that write together, each its slice of the cells; this process alone by default.

    Raises
    ------
    FileError
        If the file cannot be written.

    Notes
    -----
    Source: NumPy's documentation, "NPY format", version 1.0.
    """
    comm = comm or SerialComm()
    count = np.array([partition.n_cells], np.int64)
    n_cells, first = int(comm.allreduce(count)[0]), int(comm.exscan(count)[0])
    header = _npy_header(n_cells)
    agreed(comm, lambda: _begin(Path(path), header) if comm.rank == 0 else None)
    offset = len(header) + first * np.dtype(PART).itemsize
    rows = np.ascontiguousarray(partition.cell_part, "<i4")
    write_in_turn(Path(path), [(offset, rows)] if len(rows) else [], comm)


def _npy_header(n_cells: int) -> bytes:
    """Return how a .npy file of so many int32 begins."""
    about = {"descr": "<i4", "fortran_order": False, "shape": (n_cells,)}
    sink = BytesIO()
    np.lib.format.write_array_header_1_0(sink, about)
    return sink.getvalue()


def _begin(path: Path, header: bytes) -> None:
    """Write the first bytes of a file."""
    try:
        path.write_bytes(header)
    except OSError as error:
        raise _cannot(path, error) from error


def json_text(value: Any) -> str:
    """Return valid JSON (no NaN) of mappings, sequences, arrays, numbers, text and paths.

    Examples
    --------
    >>> print(json_text({"cut": np.int64(3), "ratio": float("nan"), "parts": np.arange(2)}))
    {
      "cut": 3,
      "ratio": null,
      "parts": [
        0,
        1
      ]
    }
    """
    plain = _plain(value)
    text = json.dumps(plain, indent=2, allow_nan=False, ensure_ascii=False) + "\n"
    if text.isascii() or not any("\ud800" <= letter <= "\udfff" for letter in text):
        return text
    # a file name that is no UTF-8 holds lone surrogates, which only escapes can carry
    return json.dumps(plain, indent=2, allow_nan=False) + "\n"


def _plain(value: Any) -> Any:
    """Turn a value into what JSON knows."""
    if value is None or isinstance(value, bool | str | int):
        return value
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, np.generic | np.ndarray):
        return _plain(value.tolist())
    if isinstance(value, Mapping):
        return {str(key): _plain(item) for key, item in value.items()}
    if isinstance(value, Path):
        return str(value)
    if isinstance(value, Sequence | set | frozenset):
        return [_plain(item) for item in (sorted(value) if isinstance(value, set) else value)]
    raise InputError(f"a {type(value).__name__} has no form in JSON; wanted numbers, text or lists")


def _cannot(path: str | PathLike[str], error: OSError) -> FileError:
    """Say in one line why a file could not be written."""
    return FileError(f"{path}: cannot be written: {error.strerror or error}")
