"""What can be said of the least bottleneck before any probe (`sfcpart.methods.curve.chunks`)."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sfcpart.dtypes import BoolArray, FloatArray, Int64Array
from sfcpart.kernels.curve import chunks as kernel
from sfcpart.methods.curve.abreast import Ask, Asking
from sfcpart.methods.curve.line import Line

__all__ = ["Bounds"]

_LEAST_INT = np.iinfo(np.int64).min + 1


@dataclass(frozen=True, eq=False)
class Bounds:
    """Where the search for the least bottleneck begins.

    Attributes
    ----------
    lowest : float
        No division has a smaller bottleneck: B >= W / sum(speed), w_max / max(speed), lightest
        window / min(speed), where a window is the least number of items a part takes; rounding is
        kept below.
    widest : float
        The heaviest item on the slowest part: a step that reaches from a bound to a division.
    heavy : (k,) int64
        This rank's positions whose next window may be too much for a part.
    """

    lowest: float = 0.0
    widest: float = 0.0
    heavy: Int64Array = field(default_factory=lambda: np.empty(0, np.int64))

    @classmethod
    def asked(
        cls,
        line: Line,
        begin: int,
        end: int,
        *,
        speed: FloatArray,
        limit: Int64Array,
        least: int,
        weight: int,
    ) -> Asking[Bounds]:
        """Look over the items [begin, end) of a line, of the given weight in all."""
        if begin == end:
            return cls()
        heaviest, widest, lightest, most = yield from _extremes(line, begin, end, least)
        slowest, fastest = float(speed.min()), float(speed.max())
        share = weight / float(speed.sum()) * (1 - 1e-9)
        if slowest == fastest:  # loads are integers
            share = -(-weight // len(speed)) / slowest
        lowest = max(share, heaviest / fastest, lightest / slowest)
        if lightest > weight:  # fewer items than `least`: no division at all
            lowest = weight / slowest
        smallest = int(kernel.caps(lowest, speed, max(weight, 1)).min())
        if not least or (widest <= smallest and most <= int(limit.min())):
            return cls(lowest, heaviest / slowest)
        heavy = _heavy_windows(line, begin, end, least, smallest, int(limit.min()))
        return cls(lowest, heaviest / slowest, heavy)


def _extremes(line: Line, begin: int, end: int, least: int) -> Asking[tuple[int, int, int, int]]:
    """Return heaviest item, heaviest and lightest window, and most limited window."""
    width = max(1, least)
    found = np.array([0, 0, _LEAST_INT, 0], np.int64)
    for _, weight, limited in line.windows(begin, end, width):
        if len(weight):
            found[1:3] = np.maximum(found[1:3], [weight.max(), -weight.min()])
        if len(limited):
            found[3] = max(found[3], limited.max())
    if width > 1 and len(line.total):
        for _, weight, _ in line.windows(begin, end, 1):
            found[0] = max(found[0], weight.max())
    found[0] = found[0] if width > 1 else found[1]
    heaviest, widest, lightest, most = map(int, (yield Ask("max", found)))
    if not len(line.total):
        return 1, width, least, most
    return heaviest, widest, -lightest if least else 0, most


def _heavy_windows(
    line: Line, begin: int, end: int, least: int, most_weight: int, most_limited: int
) -> Int64Array:
    """Return this rank's positions whose next `least` items may be too much for a part."""
    places = [np.empty(0, np.int64)]
    for start, weight, limited in line.windows(begin, end, least):
        is_heavy: BoolArray = np.zeros(max(len(weight), len(limited)), np.bool_)
        if len(weight):
            is_heavy |= weight > most_weight
        if len(limited):
            is_heavy |= limited > most_limited
        places.append(np.flatnonzero(is_heavy) + start)
    return np.concatenate(places)
