"""Stable order of int64 keys: scatter into buckets that fit the cache, finish each there.

How: one pass counts and one scatters (key, row) pairs by their leading bits into about 2000
buckets, threads side by side with offsets of their own, so that equal keys keep their rows
ascending. Each bucket is then finished by counting on the bits its own range needs, until groups
are small enough to insert. A bucket that took a large share of all keys (clustered points) is
scattered again by all threads. Keys already in order cost one pass.

Cost: O(n) for each 11 bits that tell keys apart; memory 2 copies of (key, row).
Source: most-significant-digit radix sort and counting sort are textbook methods (Knuth, The Art
of Computer Programming 3, sections 5.2 and 5.2.5; from memory).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from sfcpart.dtypes import Array, BoolArray, Int64Array, IntArray, index_dtype
from sfcpart.kernels._jit import jit
from sfcpart.kernels.threads import ranges, run_ranges

__all__ = ["Survey", "put_rows", "sorting", "stable_order", "survey", "take_rows"]

_DIGIT = 11
_MOST_DIGITS = 1 << _DIGIT
_SMALL = 24
"""Groups up to this size are sorted by insertion."""
_LARGE = 1 << 18
"""Buckets above this size are scattered again by all threads."""


def stable_order(key: Int64Array) -> tuple[IntArray, Int64Array]:
    """Return the rows of `key` in ascending order of key, equal keys in row order.

    Parameters
    ----------
    key : (n,) int64, non-negative

    Returns
    -------
    order : (n,) int32 or int64
    sorted_key : (n,) int64
        `key[order]`; `key` itself if it was in order.

    Examples
    --------
    >>> order, sorted_key = stable_order(np.array([5, 3, 5, 0]))
    >>> order.tolist(), sorted_key.tolist()
    ([3, 1, 0, 2], [0, 3, 5, 5])
    """
    order, sorted_key = sorting(key)
    if order is None:
        order = np.arange(len(key), dtype=index_dtype(len(key)))
    return order, sorted_key


def sorting(key: Int64Array) -> tuple[IntArray | None, Int64Array]:
    """Return what `stable_order` does, but None for the order of keys that are in order."""
    found = survey(key)
    if found.in_order:
        return None, key
    return _sort_rows(key, np.empty(0, index_dtype(len(key))), found)


def take_rows(values: Array, rows: IntArray) -> Array:
    """Return `values[rows]`, with all threads."""
    out = np.empty(len(rows), values.dtype)
    run_ranges(take_range, len(rows), values, rows, out)
    return out


def put_rows(values: Array, rows: IntArray) -> Array:
    """Return the array whose `rows` are `values`: rows are a permutation; with all threads."""
    out = np.empty(len(rows), values.dtype)
    run_ranges(put_range, len(rows), values, rows, out)
    return out


class Survey(NamedTuple):
    """What one pass finds out about keys.

    Attributes
    ----------
    low, high : int
        Lowest and highest key.
    in_order : bool
    n_equal : int
        Neighbours that are equal.
    """

    low: int
    high: int
    in_order: bool
    n_equal: int


def survey(key: Int64Array) -> Survey:
    """Look at all keys once, with all threads."""
    found = np.array(run_ranges(survey_range, len(key), key))
    low, high = int(found[:, 0].min()), int(found[:, 1].max())
    return Survey(low, high, not found[:, 2].any(), int(found[:, 3].sum()))


def _sort_rows(key: Int64Array, row: IntArray, found: Survey) -> tuple[IntArray, Int64Array]:
    """Return new arrays with rows and keys in order; an empty `row` stands for 0, 1, 2, ..."""
    n, low, high = len(key), found.low, found.high
    shift = max(0, (high - low).bit_length() - _DIGIT)
    n_buckets = ((high - low) >> shift) + 1
    counts = np.array(run_ranges(count_range, n, key, low, shift, n_buckets))
    before = np.cumsum(counts.T.ravel()) - counts.T.ravel()
    offsets = np.ascontiguousarray(before.reshape(n_buckets, -1).T)
    edge = np.append(offsets[0], n)
    sorted_key, sorted_row = np.empty_like(key), np.empty(n, row.dtype)
    starts = np.array([start for start, _ in ranges(n)])
    run_ranges(scatter_range, n, key, row, low, shift, starts, offsets, sorted_key, sorted_row)
    large = np.flatnonzero(np.diff(edge) > max(_LARGE, n >> 4))
    for bucket in large if shift else ():
        _sort_again(sorted_key[edge[bucket] : edge[bucket + 1]],
                    sorted_row[edge[bucket] : edge[bucket + 1]])  # fmt: skip
    if shift:
        skip = np.zeros(n_buckets, np.bool_)
        skip[large] = True
        run_ranges(finish_range, n, edge, skip, sorted_key, sorted_row)
    return sorted_row, sorted_key


def _sort_again(key: Int64Array, row: IntArray) -> None:
    """Sort a large bucket in place with all threads."""
    found = survey(key)
    if not found.in_order:
        row[:], key[:] = _sort_rows(key, row, found)


@jit
def take_range(start: int, stop: int, values: Array, rows: IntArray, out: Array) -> None:
    """Fetch some values."""
    for i in range(start, stop):
        out[i] = values[rows[i]]


@jit
def put_range(start: int, stop: int, values: Array, rows: IntArray, out: Array) -> None:
    """Place some values."""
    for i in range(start, stop):
        out[rows[i]] = values[i]


@jit
def survey_range(start: int, stop: int, key: Int64Array) -> tuple[int, int, int, int]:
    """Return lowest and highest key of some rows, falls and equals to the row after each."""
    if len(key) == 0:
        return 0, 0, 0, 0
    low, high = key[stop - 1], key[stop - 1]
    falls, equals = 0, 0
    for i in range(start, min(stop, len(key) - 1)):
        low = min(low, key[i])
        high = max(high, key[i])
        falls += key[i] > key[i + 1]
        equals += key[i] == key[i + 1]
    return low, high, falls, equals


@jit
def count_range(
    start: int, stop: int, key: Int64Array, low: int, shift: int, n_buckets: int
) -> Int64Array:
    """Count the keys of some rows in each bucket."""
    count = np.zeros(n_buckets, np.int64)
    for i in range(start, stop):
        count[(key[i] - low) >> shift] += 1
    return count


@jit
def scatter_range(
    start: int,
    stop: int,
    key: Int64Array,
    row: IntArray,
    low: int,
    shift: int,
    starts: Int64Array,
    offsets: Int64Array,
    out_key: Int64Array,
    out_row: IntArray,
) -> None:
    """Move some rows to their buckets, each range at the offsets counted for it."""
    slot = 0
    while starts[slot] < start:
        slot += 1
    offset = offsets[slot]
    named = len(row) > 0
    for i in range(start, stop):
        bucket = (key[i] - low) >> shift
        at = offset[bucket]
        offset[bucket] = at + 1
        out_key[at] = key[i]
        out_row[at] = row[i] if named else i


@jit
def finish_range(
    start: int,
    stop: int,
    edge: Int64Array,
    skip: BoolArray,
    key: Int64Array,
    row: IntArray,
) -> None:
    """Sort, in place, the buckets that begin at positions start..stop-1."""
    first = 0
    while first < len(edge) - 1 and edge[first] < start:
        first += 1
    last = first
    while last < len(edge) - 1 and edge[last] < stop:
        last += 1
    widest = 0
    for bucket in range(first, last):
        if not skip[bucket]:
            widest = max(widest, edge[bucket + 1] - edge[bucket])
    spare_key = np.empty(widest, key.dtype)
    spare_row = np.empty(widest, row.dtype)
    count = np.empty(_MOST_DIGITS + 1, np.int64)
    todo = np.empty((widest // _SMALL + 2, 2), np.int64)
    for bucket in range(first, last):
        if skip[bucket] or edge[bucket + 1] - edge[bucket] < 2:
            continue
        todo[0, 0], todo[0, 1] = edge[bucket], edge[bucket + 1]
        n_todo = 1
        while n_todo > 0:
            n_todo -= 1
            begin, end = todo[n_todo, 0], todo[n_todo, 1]
            n_todo = sort_group(begin, end, key, row, spare_key, spare_row, count, todo, n_todo)


@jit
def sort_group(
    begin: int,
    end: int,
    key: Int64Array,
    row: IntArray,
    spare_key: Int64Array,
    spare_row: IntArray,
    count: Int64Array,
    todo: Int64Array,
    n_todo: int,
) -> int:
    """Count a group out by leading bits; insert small groups, put large ones on the list."""
    low, high = key[begin], key[begin]
    for i in range(begin + 1, end):
        low = min(low, key[i])
        high = max(high, key[i])
    if low == high:
        return n_todo
    # about as many digits as there are rows, at most 2048, cover the range
    most = 2
    while most < end - begin and most < _MOST_DIGITS:
        most <<= 1
    shift = 0
    while (high - low) >> shift >= most:
        shift += 1
    n_digits = ((high - low) >> shift) + 1
    count[: n_digits + 1] = 0
    for i in range(begin, end):
        count[((key[i] - low) >> shift) + 1] += 1
    for digit in range(n_digits):
        count[digit + 1] += count[digit]
    for i in range(begin, end):
        digit = (key[i] - low) >> shift
        at = count[digit]
        count[digit] = at + 1
        spare_key[at] = key[i]
        spare_row[at] = row[i]
    left = 0  # count[digit] is now the end of the digit's group
    for digit in range(n_digits):
        right = count[digit]
        sorts_itself = right - left <= _SMALL or shift == 0
        for at in range(left, right):
            to = begin + at
            if sorts_itself:
                while to > begin + left and key[to - 1] > spare_key[at]:
                    key[to] = key[to - 1]
                    row[to] = row[to - 1]
                    to -= 1
            key[to] = spare_key[at]
            row[to] = spare_row[at]
        if not sorts_itself:
            todo[n_todo, 0], todo[n_todo, 1] = begin + left, begin + right
            n_todo += 1
        left = right
    return n_todo
