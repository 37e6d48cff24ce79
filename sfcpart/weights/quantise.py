"""Weights as integers: one power of two times the float, rounded, with proved headroom.

Sums of integers do not depend on their order, so every later figure is the same for any number of
ranks and threads. The proof: with n weights whose scaled, floored sum is s, the sum of the scaled
weights is below s + n; the scale 2**k is the largest with (s + n) 2**k' + n <= 2**53, where n more
allows for rounding each weight. So the total of all weights, hence any sum, is at most 2**53 and
is exact even as a float64. Whole numbers with a total of at most 2**53 are kept as they are.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.dtypes import WEIGHT, Array, FloatArray, Int64Array
from sfcpart.errors import WeightError

__all__ = ["Quantised", "quantise", "quantise_limits"]

_MOST = 1 << 53


@dataclass(frozen=True, eq=False)
class Quantised:
    """Integer weights and what they stand for.

    Attributes
    ----------
    values : (n_local,) int64
        `rint(weight * 2**exponent)`.
    exponent : int
    """

    values: Int64Array
    exponent: int

    @property
    def unit(self) -> float:
        """Weight that the integer 1 stands for."""
        return float(np.ldexp(1.0, -self.exponent))


def quantise(
    weights: ArrayLike, *, comm: Comm | None = None, first_gid: int = 0, what: str = "weight"
) -> Quantised:
    """Turn weights into int64, alike on all ranks.

    Parameters
    ----------
    weights : (n_local,) real numbers
        Finite, >= 0, not all zero.
    comm : Comm, optional
        Ranks that hold consecutive slices of the cells; this process alone by default.
    first_gid : int
        Number of the first cell here, for messages.
    what : str
        What the numbers are, for messages.

    Returns
    -------
    Quantised
        Whole numbers with a total of at most 2**53 are kept; others get about 53 bits of the total.

    Raises
    ------
    WeightError
        If a weight is negative, NaN or infinite, if all are zero, or if one is so large that the
        others vanish beside it. The first such cell is named.

    Notes
    -----
    Four passes over the weights.

    Examples
    --------
    >>> quantise([3.0, 0.0, 5.0]).values.tolist()
    [3, 0, 5]
    >>> halves = quantise([0.5, 0.25])
    >>> halves.unit * halves.values
    array([0.5 , 0.25])
    """
    comm = comm or SerialComm()
    error, array = None, np.empty(0)
    try:
        array = _checked(np.asarray(weights), first_gid, what)
    except WeightError as caught:
        error = caught
    comm.check(error)
    n = int(comm.allreduce(np.array([len(array)], WEIGHT))[0])
    highest = float(comm.allreduce(np.array([array.max(initial=0)], np.float64), "max")[0])
    if n == 0:
        return Quantised(np.empty(0, WEIGHT), 0)
    if highest == 0:
        raise WeightError(f"all {n} {what}s are zero; wanted at least one above 0")
    exponent = _exponent(array, n, highest, comm)
    values = _scaled(array, exponent)
    comm.check(_vanishing(array, values, n, what, comm))
    return Quantised(values, exponent)


def quantise_limits(limits: ArrayLike, exponent: int) -> Int64Array:
    """Turn limits into the integers of weights quantised with `exponent`, rounded down.

    Parameters
    ----------
    limits : (n_parts,) real numbers, or one
    exponent : int
        That of `Quantised`.

    Raises
    ------
    WeightError
        If a limit is NaN or negative.

    Examples
    --------
    >>> quantise_limits([2.0, 2.75], 1).tolist()
    [4, 5]
    """
    array = np.asarray(limits, np.float64)
    wrong = np.flatnonzero(~(array >= 0))
    if len(wrong):
        part = int(wrong[0])
        raise WeightError(f"the limit of part {part} is {array.flat[part]}; wanted numbers >= 0")
    with np.errstate(over="ignore"):
        scaled = np.floor(np.ldexp(array, exponent))
    return np.minimum(scaled, float(_MOST) * 2).astype(WEIGHT)


def _checked(array: Array, first_gid: int, what: str) -> Array:
    """Return one real number a cell, or raise an error that names the first wrong one."""
    if array.ndim != 1:
        raise WeightError(f"{what}s have shape {array.shape}; wanted one number a cell")
    if array.dtype.kind not in "biuf":
        raise WeightError(f"{what}s are of type {array.dtype}; wanted real numbers")
    if array.dtype.kind == "f":
        array = array.astype(np.float64, copy=False)
    if array.dtype.kind == "b":
        array = array.astype(WEIGHT)
    if len(array) and not (array.min() >= 0 and array.max() < np.inf):
        bad = int(np.flatnonzero(~((array >= 0) & (array < np.inf)))[0])
        raise WeightError(
            f"cell {first_gid + bad} has {what} {array[bad]}; wanted finite numbers >= 0"
        )
    return array


def _exponent(array: Array, n: int, highest: float, comm: Comm) -> int:
    """Return the largest exponent with proved headroom, 0 for whole numbers that fit."""
    whole = array.dtype.kind != "f" or bool(np.all(array == np.floor(array)))
    all_whole = comm.allreduce(np.array([whole], WEIGHT), "min")[0] == 1
    if all_whole and n * highest <= _MOST:
        return 0
    # highest * 2**coarse < 2**(61 - bits of n): the sum of n floored values fits an int64
    coarse = 61 - n.bit_length() - int(np.frexp(highest)[1])
    floored = np.floor(_times_power(array, coarse)).astype(WEIGHT).sum()
    bound = int(comm.allreduce(np.array([floored], WEIGHT))[0]) + n  # of the sum times 2**coarse
    if all_whole and _shifted(bound, -coarse) <= _MOST:
        return 0
    return coarse + (_MOST - n).bit_length() - 1 - bound.bit_length()


def _shifted(value: int, by: int) -> int:
    """Return value * 2**by, rounded up."""
    return value << by if by >= 0 else -(-value >> -by)


def _times_power(array: Array, exponent: int) -> FloatArray:
    """Return array * 2**exponent; integers above 2**53 are rounded first."""
    if abs(exponent) < 1000:  # four times as fast, and as exact
        return np.asarray(array * 2.0**exponent)
    return np.ldexp(array.astype(np.float64, copy=False), exponent)


def _scaled(array: Array, exponent: int) -> Int64Array:
    """Return the rounded integers."""
    if exponent == 0 and array.dtype.kind != "f":
        return array.astype(WEIGHT, copy=False)
    return np.rint(_times_power(array, exponent)).astype(WEIGHT)


def _vanishing(
    array: Array, values: Int64Array, n: int, what: str, comm: Comm
) -> WeightError | None:
    """Return an error if the positive weights beside the largest amount to less than 1 each."""
    here = np.array([np.count_nonzero(array), values.sum()], WEIGHT)
    n_positive, total = (int(x) for x in comm.allreduce(here))
    largest = int(comm.allreduce(np.array([values.max(initial=0)], WEIGHT), "max")[0])
    if total - largest >= n_positive - 1:
        return None
    lengths = np.concatenate(comm.allgather(np.array([len(values)], WEIGHT)))
    before = int(lengths[: comm.rank].sum())
    own = np.flatnonzero(values == largest)
    place = np.array([before + own[0] if len(own) else n], WEIGHT)
    cell = int(comm.allreduce(place, "min")[0])
    return WeightError(
        f"cell {cell} has a {what} so huge that all others vanish beside it; "
        "as much as the sum of the others is enough to keep a cell alone"
    )
