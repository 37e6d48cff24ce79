"""Float sums over cells that no number of ranks or threads can change.

How: a float is cut into two whole numbers, `high` and `low`, in units of a power of two fixed by
the largest value and the number of cells of all ranks; whole numbers add up in any order. Two
words of b bits hold 2 b bits below the largest value, with b = 62 - log2(cells): 76 bits for 10^7
cells, 50 for 10^11. Whole numbers up to 2^53 are exact as far as that reaches. Source: common
practice, no source.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import frexp, isfinite

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import Array, FloatArray, Int64Array

__all__ = ["FixedPoint", "fixed_sum", "largest_values"]

_MOST = 900  # powers of two beyond which the factor itself would overflow
_HALF = 31


@dataclass(frozen=True)
class FixedPoint:
    """How values up to a largest one become two whole numbers.

    Attributes
    ----------
    factor : float
        Units of `high` in 1: a power of two.
    n_bits : int
        Bits of each word that values use; as many values as promised do not overflow.
    """

    factor: float
    n_bits: int

    @classmethod
    def of(cls, largest: float, n_values: int) -> FixedPoint:
        """Choose units for `n_values` finite values up to `largest` in size.

        Examples
        --------
        >>> FixedPoint.of(1.5, 1000)
        FixedPoint(factor=2251799813685248.0, n_bits=52)
        """
        n_bits = 62 - int(n_values).bit_length()
        exponent = max(frexp(largest)[1], -_MOST)
        return cls(2.0 ** (n_bits - exponent), n_bits)

    def words(self, values: FloatArray) -> tuple[Int64Array, Int64Array]:
        """Return `high` and `low` of each value."""
        scaled = values * self.factor
        high = np.floor(scaled)
        low = (scaled - high) * 2.0**self.n_bits
        return high.astype(np.int64), low.astype(np.int64)

    def value(self, high: Int64Array, low: Int64Array) -> FloatArray:
        """Return the floats next to sums of words."""
        high = high + (low >> self.n_bits)
        low = low & ((1 << self.n_bits) - 1)
        upper = (high >> _HALF).astype(np.float64) * 2.0**_HALF
        lower = (high & ((1 << _HALF) - 1)) + low * 2.0**-self.n_bits
        with np.errstate(over="ignore"):
            value: FloatArray = (upper + lower) / self.factor
        return value


def largest_values(columns: list[Array], comm: Comm) -> list[float]:
    """Return the largest size of a value in each column over all ranks (collective).

    Examples
    --------
    >>> from sfcpart.comm import SerialComm
    >>> largest_values([np.array([1.0, -3.0]), np.zeros(0)], SerialComm())
    [3.0, 0.0]
    """
    here = [max(c.max(initial=0.0), -c.min(initial=0.0)) for c in columns]
    found: list[float] = comm.allreduce(np.array(here, np.float64), "max").tolist()
    return found


def fixed_sum(values: FloatArray, *, n_values: int, comm: Comm) -> float:
    """Return the sum of finite floats over all ranks, the same for any number (collective).

    Parameters
    ----------
    values : (n_local,) float64
    n_values : int
        Of all ranks.
    comm : Comm

    Returns
    -------
    float
        Infinite or NaN if a value is; infinite if the sum is beyond the numbers.

    Notes
    -----
    Two reductions, of 8 and 16 bytes.

    Examples
    --------
    >>> from sfcpart.comm import SerialComm
    >>> fixed_sum(np.array([1e16, 1.0, -1e16]), n_values=3, comm=SerialComm())
    1.0
    """
    (largest,) = largest_values([values], comm)
    if not isfinite(largest):
        return largest
    fixed = FixedPoint.of(largest, n_values)
    words = fixed.words(np.asarray(values, np.float64))
    sums = comm.allreduce(np.array([word.sum() for word in words], np.int64))
    return float(fixed.value(sums[:1], sums[1:])[0])
