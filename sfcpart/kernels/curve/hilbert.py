"""Curve keys by table: several bits of every axis in one look-up.

How: a curve that refines itself is a machine whose state says how the curve runs through the
current square or cube. The machine is derived once, from the published bit construction
(J. Skilling, Programming the Hilbert curve, AIP Conf. Proc. 707, 381 (2004): reflected Gray code,
undone level by level), and then widened to `LEVELS` levels a step: 3 in 3-D (24 states x 512
entries), 4 in 2-D (4 x 256): at most 24 kB, which stay in the first-level cache. An entry holds
`digits | state << dim * levels`. Morton order is the machine with one state.

Cost: 7 (3-D) or 8 (2-D) dependent look-ups a centre.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int64Array
from sfcpart.kernels._jit import jit

__all__ = [
    "BITS",
    "LEVELS",
    "bounds_range",
    "curve_table",
    "key_range_2d",
    "key_range_3d",
    "skilling_index",
]

BITS = {1: 62, 2: 31, 3: 21}
"""Bits an axis of a key, by the number of axes: a key fits a non-negative int64."""

LEVELS = {2: 4, 3: 3}
"""Levels of the curve in one look-up, by the number of axes."""


def skilling_index(point: tuple[int, ...], bits: int) -> int:
    """Return the Hilbert index of an integer point, bit by bit (Skilling 2004, AxestoTranspose).

    Parameters
    ----------
    point : tuple of int
        Coordinates, each below 2**bits; the first axis has the most significant bit of a digit.
    bits : int
        Levels of the curve.

    Examples
    --------
    >>> skilling_index((5, 10, 20), 5)  # the example of the paper
    7865
    """
    x = list(point)
    for level in range(bits - 1, 0, -1):
        mask = (1 << level) - 1
        for axis in range(len(x)):
            if x[axis] >> level & 1:
                x[0] ^= mask
            else:
                swap = (x[0] ^ x[axis]) & mask
                x[0] ^= swap
                x[axis] ^= swap
    for axis in range(1, len(x)):
        x[axis] ^= x[axis - 1]
    flip = 0
    for level in range(bits - 1, 0, -1):
        if x[-1] >> level & 1:
            flip ^= (1 << level) - 1
    index = 0
    for level in range(bits - 1, -1, -1):
        for value in x:
            index = index << 1 | (value ^ flip) >> level & 1
    return index


def _digits_below(path: tuple[tuple[int, ...], ...], dim: int) -> tuple[int, ...]:
    """Return the curve's digit of every child of the square or cube that `path` leads to."""
    digits = []
    for child in np.ndindex((2,) * dim):
        point = tuple(
            int("".join(str(step[axis]) for step in (*path, child)), 2) for axis in range(dim)
        )
        digits.append(skilling_index(point, len(path) + 1) & (1 << dim) - 1)
    return tuple(digits)


def _machine(dim: int) -> list[list[tuple[int, int]]]:
    """Explore the Hilbert machine: for each state and child, the digit and the next state."""
    paths: list[tuple[tuple[int, ...], ...]] = [()]
    seen = {_digits_below((), dim): 0}
    machine: list[list[tuple[int, int]]] = []
    while len(machine) < len(paths):
        path = paths[len(machine)]
        digits = _digits_below(path, dim)
        row = []
        for child, digit in zip(np.ndindex((2,) * dim), digits, strict=True):
            order = _digits_below((*path, child), dim)
            if order not in seen:
                seen[order] = len(paths)
                paths.append((*path, child))
            row.append((digit, seen[order]))
        machine.append(row)
    return machine


def _widen(machine: list[list[tuple[int, int]]], dim: int) -> Int64Array:
    """Take `LEVELS` steps of the machine at once; rows indexed by state, then bits axis by axis."""
    levels = LEVELS[dim]
    width = dim * levels
    bit = np.arange(1 << width)
    axis_bits = [bit >> levels * (dim - 1 - axis) & (1 << levels) - 1 for axis in range(dim)]
    digit, following = (np.array(machine, np.int64)[:, :, k] for k in (0, 1))
    table = np.empty((len(machine), 1 << width), np.int64)
    for start in range(len(machine)):
        state, digits = np.full(1 << width, start), np.zeros(1 << width, np.int64)
        for level in range(levels - 1, -1, -1):
            child = np.zeros(1 << width, np.int64)
            for values in axis_bits:
                child = child << 1 | values >> level & 1
            digits = digits << dim | digit[state, child]
            state = following[state, child]
        table[start] = digits | state << width
    return table.ravel()


@lru_cache(maxsize=8)
def curve_table(curve: str, dim: int) -> tuple[Array, int]:
    """Return the table of a curve ("hilbert" or "morton") in 2-D or 3-D, and its first state.

    In 2-D a key has 31 levels but 32 are looked up: the first state is one whose first child
    leads to the state of the whole square.
    """
    morton = [[(child, 0) for child in range(1 << dim)]]
    machine = morton if curve == "morton" else _machine(dim)
    padding = -BITS[dim] % LEVELS[dim]
    first = 0
    for _ in range(padding):
        first = next(s for s, row in enumerate(machine) if row[0] == (0, first))
    table = _widen(machine, dim).astype(np.uint16)
    table.flags.writeable = False
    return table, first << dim * LEVELS[dim]


@jit
def bounds_range(start: int, stop: int, centers: FloatArray) -> FloatArray:
    """Return lowest and highest coordinates of some rows, (2, dim); NaN if one is not finite."""
    dim = centers.shape[1]
    bounds = np.empty((2, dim))
    for k in range(dim):
        low, high, wrong = np.inf, -np.inf, 0.0
        for i in range(start, stop):
            x = centers[i, k]
            wrong += x - x  # not finite: NaN
            low = min(low, x)
            high = max(high, x)
        bounds[0, k] = low + wrong
        bounds[1, k] = high + wrong
    return bounds


@jit
def key_range_3d(
    start: int,
    stop: int,
    centers: FloatArray,
    axes: Int64Array,
    low: FloatArray,
    scale: float,
    table: Array,
    first: int,
    rows: Int64Array,
    deeper: int,
    key: Int64Array,
) -> None:
    """Write the keys of some rows; `deeper` = 1 writes the next 21 bits an axis instead.

    `rows` selects centres (empty: all).
    """
    for i in range(start, stop):
        row = rows[i] if len(rows) else i
        x = (centers[row, axes[0]] - low[0]) * scale
        y = (centers[row, axes[1]] - low[1]) * scale
        z = (centers[row, axes[2]] - low[2]) * scale
        state = np.int64(first)
        digits = np.int64(0)
        for word in range(deeper + 1):
            ix, iy, iz = np.int64(x), np.int64(y), np.int64(z)
            digits = np.int64(0)
            for shift in range(18, -1, -3):
                entry = np.int64(
                    table[
                        state | (ix >> shift & 7) << 6 | (iy >> shift & 7) << 3 | (iz >> shift & 7)
                    ]
                )
                digits = digits << 9 | entry & 511
                state = entry & ~511
            if word < deeper:
                x, y, z = (x - ix) * 2097152.0, (y - iy) * 2097152.0, (z - iz) * 2097152.0
        key[i] = digits


@jit
def key_range_2d(
    start: int,
    stop: int,
    centers: FloatArray,
    axes: Int64Array,
    low: FloatArray,
    scale: float,
    table: Array,
    first: int,
    rows: Int64Array,
    deeper: int,
    key: Int64Array,
) -> None:
    """Write the keys of some rows; `deeper` = 1 writes the next 28 bits an axis instead.

    `rows` selects centres (empty: all). A double holds 53 bits, so 31 + 28 leave none out.
    """
    for i in range(start, stop):
        row = rows[i] if len(rows) else i
        x = (centers[row, axes[0]] - low[0]) * scale
        y = (centers[row, axes[1]] - low[1]) * scale
        state = np.int64(first)
        digits = np.int64(0)
        for word in range(deeper + 1):
            ix, iy = np.int64(x), np.int64(y)
            digits = np.int64(0)
            for shift in range(28 - 4 * word, -1, -4):
                entry = np.int64(table[state | (ix >> shift & 15) << 4 | (iy >> shift & 15)])
                digits = digits << 8 | entry & 255
                state = entry & ~255
            if word < deeper:
                x, y = (x - ix) * 268435456.0, (y - iy) * 268435456.0
        key[i] = digits
