"""Read measured seconds of ranks, with or without how many cells of each class they hold.

=============== ==================================================================================
file            content
=============== ==================================================================================
`.csv`          with a heading: columns `rank`, `seconds`, and, if there is more than one, `step`
                and `partition` (whole numbers); each other column counts a class and is named by
                it. A row a rank and step.
`.csv`, `.txt`  without a heading: a row a step, a column a rank (a single column: one step)
`.npy`          (n_ranks,) or (n_steps, n_ranks)
`.npz`          `seconds` as in .npy; each other array (n_ranks,) counts the class it is named by
HDF5            dataset `seconds` as in .npy; datasets of a group `counts`, one a class
=============== ==================================================================================

Counts by themselves (`read_counts`) are a `.csv` with a heading, a row a rank, a column a class
(and perhaps `rank`).
"""

from __future__ import annotations

import csv
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from os import PathLike
from pathlib import Path

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int64Array
from sfcpart.errors import FileError
from sfcpart.files.hdf5 import check_stored, is_hdf5, read_hdf5

__all__ = ["Timing", "read_counts", "read_timings"]

_KEYS = ("rank", "seconds", "step", "partition")


@dataclass(frozen=True, eq=False)
class Timing:
    """What ranks took with one partition.

    Attributes
    ----------
    seconds : (n_ranks,) or (n_steps, n_ranks) float64
    counts : mapping of str to (n_ranks,) float64
        By class; empty if the file holds none.
    """

    seconds: FloatArray
    counts: Mapping[str, FloatArray]


def read_timings(path: str | PathLike[str]) -> list[Timing]:
    """Read what ranks took, one `Timing` for each partition in the file.

    Parameters
    ----------
    path : path
        The layouts are in the module's docstring.

    Raises
    ------
    FileError
        If the file cannot be read, holds something else, or a rank lacks a step.
    """
    place = Path(path)
    try:
        if is_hdf5(place):
            return [_from_hdf5(place)]
        if place.suffix == ".npz":
            return [_from_npz(place)]
        if place.suffix == ".npy":
            return [Timing(_number_array(np.load(place, allow_pickle=False), place), {})]
        return _from_text(place)
    except FileError:
        raise
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {error.strerror or error}") from error
    except (ValueError, EOFError) as error:
        raise FileError(f"{place}: holds no measured seconds: {error}") from error


def read_counts(path: str | PathLike[str]) -> dict[str, FloatArray]:
    """Read how many of each class every rank holds.

    Raises
    ------
    FileError
        If the file cannot be read, or is no table of numbers with a heading.
    """
    place = Path(path)
    head, table = _table(place, _rows(place))
    if not head:
        raise FileError(f"{place}: has no heading; wanted the name of a class over each column")
    columns = dict(zip(head, table.T, strict=True))
    if "rank" in columns:
        order = _ranks(columns.pop("rank"), place)
        columns = {name: values[order] for name, values in columns.items()}
    return columns


def _from_hdf5(place: Path) -> Timing:
    """Read the datasets `seconds` and `counts/<class>`."""
    with read_hdf5(place) as file:
        if "seconds" not in file:
            raise FileError(f"{place}: has no dataset 'seconds'; wanted (n_steps, n_ranks) numbers")
        check_stored(file["seconds"], place)
        counts = file.get("counts", {})
        arrays = {name: _number_array(counts[name][()], place) for name in counts}
        return Timing(_number_array(file["seconds"][()], place), arrays)


def _from_npz(place: Path) -> Timing:
    """Read the array `seconds` and those of the classes."""
    with np.load(place, allow_pickle=False) as file:
        arrays = {name: _number_array(file[name], place) for name in file.files}
    if "seconds" not in arrays:
        raise FileError(f"{place}: has no array 'seconds'; wanted (n_steps, n_ranks) numbers")
    return Timing(arrays.pop("seconds"), arrays)


def _number_array(array: Array, place: Path) -> FloatArray:
    """Return an array of numbers as float64."""
    if array.dtype.kind not in "biuf":
        raise FileError(f"{place}: holds {array.dtype} values; wanted numbers")
    return array.astype(np.float64)


def _rows(place: Path) -> list[list[str]]:
    """Return the words of each line; `#` begins a comment."""
    try:
        lines = place.read_text("utf-8-sig").splitlines()
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {error.strerror or error}") from error
    except UnicodeDecodeError as error:
        raise FileError(f"{place}: is no text; wanted a table of numbers") from error
    kept = [line.partition("#")[0].strip() for line in lines]
    kept = [line for line in kept if line]
    if not kept:
        raise FileError(f"{place}: is empty; wanted measured numbers")
    if "," in kept[0]:
        return [[word.strip() for word in row] for row in csv.reader(kept)]
    return [line.split() for line in kept]


def _table(place: Path, rows: Sequence[Sequence[str]]) -> tuple[list[str], FloatArray]:
    """Return the heading, if there is one, and the numbers."""
    head: list[str] = []
    if not all(map(_is_number, rows[0])):
        head, rows = list(rows[0]), rows[1:]
    if len(set(head)) < len(head) or not rows:
        raise FileError(f"{place}: wanted a table of numbers, each column named once")
    width = len(head or rows[0])
    for number, row in enumerate(rows):
        if len(row) != width or not all(map(_is_number, row)):
            raise FileError(
                f"{place}: row {number} is {','.join(row)[:60]!r}; wanted {width} numbers"
            )
    return head, np.array(rows, dtype=object).astype(np.float64)


def _from_text(place: Path) -> list[Timing]:
    """Read rows of steps and columns of ranks, or a long table with a heading."""
    head, table = _table(place, _rows(place))
    if not head:
        return [Timing(table[:, 0] if table.shape[1] == 1 else table, {})]
    if "rank" not in head or "seconds" not in head:
        raise FileError(f"{place}: has the columns {', '.join(head)}; wanted rank and seconds")
    columns = dict(zip(head, table.T, strict=True))
    partition = columns.get("partition", np.zeros(len(table)))
    return [
        _of_partition({name: values[partition == one] for name, values in columns.items()}, place)
        for one in np.unique(partition)
    ]


def _of_partition(columns: Mapping[str, FloatArray], place: Path) -> Timing:
    """Arrange the rows of one partition by step and rank."""
    n_rows = len(columns["rank"])
    steps, step = np.unique(columns.get("step", np.zeros(n_rows)), return_inverse=True)
    ranks, rank = np.unique(columns["rank"], return_inverse=True)
    _ranks(ranks, place)
    key = step * len(ranks) + rank
    if len(np.unique(key)) < n_rows or n_rows < len(steps) * len(ranks):
        times = np.bincount(key, minlength=len(steps) * len(ranks))
        odd = int(np.argmax(times != 1))
        raise FileError(
            f"{place}: rank {ranks[odd % len(ranks)]:.0f} has {times[odd]} rows for step "
            f"{steps[odd // len(ranks)]:.0f}; wanted one for each rank and step"
        )
    order = np.argsort(key)
    form = (len(steps), len(ranks))
    counts = {}
    for name in columns.keys() - _KEYS:
        values = columns[name][order].reshape(form)
        if not np.array_equal(values, np.broadcast_to(values[0], form), equal_nan=True):
            raise FileError(
                f"{place}: counts of {name!r} change from step to step; give each state a number "
                "of its own as 'partition'"
            )
        counts[name] = values[0]
    in_order = {name: counts[name] for name in columns if name in counts}
    return Timing(columns["seconds"][order].reshape(form), in_order)


def _ranks(ranks: FloatArray, place: Path) -> Int64Array:
    """Return the rows in the order of ranks, which are 0, 1, ... without gaps."""
    order = np.argsort(ranks, kind="stable")
    if not np.array_equal(ranks[order], np.arange(len(ranks))):
        raise FileError(f"{place}: ranks are not 0 to {len(ranks) - 1}, each once")
    return order


def _is_number(word: str) -> bool:
    """Tell whether a word is a number."""
    try:
        float(word)
    except ValueError:
        return False
    return True
