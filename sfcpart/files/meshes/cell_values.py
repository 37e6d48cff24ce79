"""Read one number a cell from a file: parts, weights, groups."""

from __future__ import annotations

from os import PathLike
from pathlib import Path

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import Array, Int64Array
from sfcpart.errors import FileError, InputError
from sfcpart.files.meshes.formats import head_of, told
from sfcpart.slices.gate import agreed
from sfcpart.slices.routing import hand_out_rows

__all__ = ["read_cell_slice", "read_cell_values"]


def read_cell_values(path: str | PathLike[str], n_cells: int | None) -> Array:
    r"""Read one number a cell: parts, weights, groups.

    Parameters
    ----------
    path : path
        `.npy` (one row of numbers), or text: one number a line, `#` begins a comment; a `.csv`
        may begin with a line of heading.
    n_cells : int or None
        How many numbers there must be; None: any number of them.

    Returns
    -------
    (n_cells,) int64 or float64
        Integers if all are written as integers.

    Raises
    ------
    FileError
        If the file cannot be read or holds something else than numbers.
    InputError
        If the number of values is not the number of cells.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     _ = Path(folder, "cell_part.txt").write_text("0\n0\n1  # the last cell\n")
    ...     read_cell_values(Path(folder, "cell_part.txt"), 3)
    array([0, 0, 1])
    """
    place = Path(path)
    head = head_of(place)
    try:
        values = _npy(place) if head[:6] == b"\x93NUMPY" else _text_values(place)
    except FileError:
        raise
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {told(error)}") from error
    if values.ndim == 1 and n_cells is None:
        return values
    if values.shape != (n_cells,):
        wanted = "one row of them" if n_cells is None else str(n_cells)
        raise InputError(
            f"{place}: holds {'x'.join(map(str, values.shape))} values; "
            f"wanted {wanted}, one a cell, in the mesh's order"
        )
    return values


def read_cell_slice(path: str | PathLike[str], rank_first: Int64Array, *, comm: Comm) -> Array:
    """Read this rank's rows of one number a cell (collective).

    Parameters
    ----------
    path : path
        As for `read_cell_values`. Of a `.npy` file each rank reads its rows; text is read by
        rank 0, which must hold the numbers of all cells.
    rank_first : (size + 1,) int64
        First cell of every rank, and the number of cells.
    comm : Comm

    Returns
    -------
    (n_local,) int64 or float64

    Raises
    ------
    FileError, InputError
        As `read_cell_values`, on all ranks alike.

    Examples
    --------
    >>> import tempfile
    >>> from sfcpart.comm import run_ranks
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     np.save(f"{folder}/a.npy", np.array([0, 0, 1]))
    ...     run_ranks(2, lambda comm: read_cell_slice(
    ...         f"{folder}/a.npy", np.array([0, 1, 3]), comm=comm).tolist())
    [[0], [0, 1]]
    """
    place, n_cells = Path(path), int(rank_first[-1])
    lo, hi = int(rank_first[comm.rank]), int(rank_first[comm.rank + 1])
    if agreed(comm, lambda: head_of(place))[:6] == b"\x93NUMPY":
        return agreed(comm, lambda: _npy_rows(place, n_cells, lo, hi))
    whole = agreed(
        comm, lambda: read_cell_values(place, n_cells) if comm.rank == 0 else np.zeros(0)
    )
    dtype = comm.bcast_object(whole.dtype)
    return hand_out_rows(comm, whole.astype(dtype), n_local=hi - lo)


def _npy_rows(place: Path, n_cells: int, lo: int, hi: int) -> Array:
    """Read some rows of a .npy array of one number a cell."""
    try:
        mapped = np.load(place, mmap_mode="r", allow_pickle=False)
    except (OSError, ValueError, EOFError, SyntaxError, TypeError):
        return read_cell_values(place, n_cells)  # says what is wrong
    if mapped.shape != (n_cells,) or mapped.dtype.kind not in "if":
        return read_cell_values(place, n_cells)[lo:hi]
    return np.array(mapped[lo:hi], np.float64 if mapped.dtype.kind == "f" else np.int64)


def _npy(place: Path) -> Array:
    """Read a .npy array of numbers, never objects."""
    try:
        mapped = np.load(place, mmap_mode="r", allow_pickle=False)
    except (ValueError, EOFError, SyntaxError, TypeError) as error:
        raise FileError(f"{place}: is no usable .npy file: {error}") from error
    if mapped.dtype.kind not in "biuf":
        raise FileError(f"{place}: holds {mapped.dtype} values; wanted integers or reals")
    wide = np.float64 if mapped.dtype.kind == "f" else np.int64
    values = np.array(mapped)
    if values.ndim == 2 and 1 in values.shape:
        values = values.reshape(-1)
    if values.dtype == np.uint64 and values.size and values.max() > np.iinfo(np.int64).max:
        raise FileError(f"{place}: holds {values.max()}; the largest integer is 2**63 - 1")
    return values.astype(wide, copy=False)


def _text_values(place: Path) -> Array:
    """Read one number a line."""
    try:
        lines = place.read_text("utf-8-sig").splitlines()
    except UnicodeDecodeError as error:
        raise FileError(f"{place}: is neither .npy nor text; wanted one number a line") from error
    words = [line.partition("#")[0].strip().rstrip(",;").strip() for line in lines]
    rows = [(row, word) for row, word in enumerate(words, 1) if word]
    if rows and place.suffix.lower() == ".csv" and not _is_number(rows[0][1]):
        rows = rows[1:]
    texts = [word for _, word in rows]
    for dtype in (np.int64, np.float64):
        try:
            return np.array(texts, dtype=object).astype(dtype) if texts else np.zeros(0, dtype)
        except (ValueError, OverflowError):
            continue
    row, word = next((row, word) for row, word in rows if not _is_number(word))
    raise FileError(f"{place}: line {row} is {word[:40]!r}; wanted one number a line")


def _is_number(word: str) -> bool:
    """Tell whether a word is a number."""
    try:
        float(word)
    except ValueError:
        return False
    return True
