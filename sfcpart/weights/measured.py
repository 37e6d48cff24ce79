"""The gate of `fit_weights`: measured seconds and counts checked, steps averaged, made rows."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TypeAlias, cast

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.errors import InputError

__all__ = ["Measured", "Rows", "gather_rows"]

Measured: TypeAlias = ArrayLike | Sequence[ArrayLike]
"""Seconds of each rank, of each step and rank, or a sequence of these."""


@dataclass(frozen=True, eq=False)
class Rows:
    """One row for each rank of each table of counts that holds anything.

    Attributes
    ----------
    classes : tuple of str
    count : (n_rows, n_classes) float64
    seconds : (n_rows,) float64
        Mean over the steps.
    rank : (n_rows,) int64
    n_ranks, n_tables, n_steps : int
        Ranks of the largest table; tables; steps of all tables.
    n_tables_alike : bool
        Whether all tables are of the same number of ranks.
    repeat_error : float
        Relative error of a row as the steps tell it, NaN where every table has one step.
    """

    classes: tuple[str, ...]
    count: FloatArray
    seconds: FloatArray
    rank: Int64Array
    n_ranks: int
    n_tables: int
    n_steps: int
    n_tables_alike: bool
    repeat_error: float

    def rank_means(self, values: FloatArray) -> FloatArray:
        """Return the mean of the rows of each rank, 1 for ranks without rows."""
        times = np.bincount(self.rank, minlength=self.n_ranks)
        sums = np.bincount(self.rank, values, minlength=self.n_ranks)
        return np.where(times > 0, sums / np.maximum(times, 1), 1.0)


def gather_rows(
    seconds: Measured, counts: Mapping[str, ArrayLike] | Sequence[Mapping[str, ArrayLike]]
) -> Rows:
    """Check and arrange what was measured; see `fit_weights` for the meanings."""
    tables = [counts] if isinstance(counts, Mapping) else list(counts)
    times = [cast(ArrayLike, seconds)] if isinstance(counts, Mapping) else list(seconds)  # type: ignore[arg-type]
    if not tables or len(tables) != len(times):
        raise InputError(
            f"{len(times)} arrays of seconds for {len(tables)} tables of counts; wanted one for "
            "each, and at least one"
        )
    classes = _classes(tables)
    count = [_count(table, classes, k) for k, table in enumerate(tables)]
    steps = [_seconds(time, len(count[k]), k) for k, time in enumerate(times)]
    used = [table.any(axis=1) for table in count]
    rows = Rows(
        classes=classes,
        count=np.concatenate([table[kept] for table, kept in zip(count, used, strict=True)]),
        seconds=np.concatenate([s.mean(axis=0)[k] for s, k in zip(steps, used, strict=True)]),
        rank=np.concatenate([np.flatnonzero(kept) for kept in used]),
        n_ranks=max(map(len, count)),
        n_tables=len(tables),
        n_steps=sum(map(len, steps)),
        n_tables_alike=len({len(table) for table in count}) == 1,
        repeat_error=_repeat_error([s[:, k] for s, k in zip(steps, used, strict=True)]),
    )
    _check_enough(rows)
    return rows


def _classes(tables: Sequence[Mapping[str, ArrayLike]]) -> tuple[str, ...]:
    """Return the classes of the first table, which all tables must have."""
    classes = tuple(map(str, tables[0]))
    if not classes:
        raise InputError("the table of counts has no class; wanted at least one")
    for k, table in enumerate(tables):
        odd = sorted(set(classes) ^ set(map(str, table)))
        if odd:
            raise InputError(
                f"class {odd[0]!r} is in one table of counts and not in another ({k} against 0); "
                "wanted the same classes in all, with 0 where a rank has none"
            )
    return classes


def _count(table: Mapping[str, ArrayLike], classes: Sequence[str], number: int) -> FloatArray:
    """Return the counts of one table, (n_ranks, n_classes)."""
    columns = [_numbers(table[name], f"counts of {name!r} (table {number})") for name in classes]
    shapes = {column.shape for column in columns}
    if len(shapes) > 1 or columns[0].ndim != 1 or not len(columns[0]):
        told = ", ".join(f"{n!r} {c.shape}" for n, c in zip(classes, columns, strict=True))
        raise InputError(f"counts of table {number} have shapes {told}; wanted one number a rank")
    return np.stack(columns, axis=1)


def _seconds(values: ArrayLike, n_ranks: int, number: int) -> FloatArray:
    """Return seconds as (n_steps, n_ranks)."""
    array = _numbers(values, f"seconds (table {number})")
    array = array[None, :] if array.ndim == 1 else array
    if array.ndim != 2 or array.shape[1] != n_ranks or not len(array):
        raise InputError(
            f"seconds of table {number} have shape {np.shape(values)}; wanted ({n_ranks},) or "
            f"(n_steps, {n_ranks}): one number for each of the {n_ranks} ranks counted"
        )
    if not array.any():
        raise InputError(f"all seconds of table {number} are 0; wanted measured times")
    return array


def _numbers(values: ArrayLike, what: str) -> FloatArray:
    """Return finite numbers >= 0, or say which is none."""
    try:
        array = np.asarray(values, np.float64)
    except (TypeError, ValueError) as error:
        raise InputError(f"{what} are no table of numbers: {error}") from None
    wrong = np.argwhere(~(np.isfinite(array) & (array >= 0)))
    if len(wrong):
        place = ", ".join(map(str, wrong[0]))
        raise InputError(f"{what}[{place}] is {array[tuple(wrong[0])]}; wanted numbers >= 0")
    return array


def _repeat_error(steps: Sequence[FloatArray]) -> float:
    """Return the relative error of a mean over steps, from how far steps differ."""
    squares, freedom = 0.0, 0
    for array in steps:
        mean = np.maximum(array.mean(axis=0), 1e-300)
        squares += float((((array - mean) / mean) ** 2).sum()) / len(array)
        freedom += (len(array) - 1) * array.shape[1]
    return float(np.sqrt(squares / freedom)) if freedom else float("nan")


def _check_enough(rows: Rows) -> None:
    """Refuse fewer observations than classes."""
    n_rows, n_classes = rows.count.shape
    if n_rows < n_classes:
        raise InputError(
            f"too few observations: {n_rows} ranks with cells (over all tables) for {n_classes} "
            "classes; measure more ranks or partitions, or join classes"
        )
