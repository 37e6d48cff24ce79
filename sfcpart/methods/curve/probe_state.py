"""What travels with a probe of the least bottleneck (`sfcpart.methods.curve.chunks`)."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array

__all__ = ["ProbeState", "pack", "unpack"]


@dataclass(eq=False)
class ProbeState:
    """What a probe knows beyond a stretch.

    Attributes
    ----------
    rows : (n, 5) int64
        Intervals of good positions: cut, low, high, weight before low, limited weight before low;
        by cut, then place.
    brackets : (2,) float64
        Smallest quotient above the bottleneck and largest below that a comparison met.
    """

    rows: Int64Array
    brackets: FloatArray

    def good_start(self, begin: int) -> bool:
        """Tell whether the whole line can be divided from `begin`."""
        return bool(np.any((self.rows[:, 0] == 0) & (self.rows[:, 1] == begin)))


def pack(states: Sequence[ProbeState]) -> Int64Array:
    """Return some states in one array."""
    pieces = [
        piece
        for state in states
        for piece in ([len(state.rows)], state.brackets.view(np.int64), state.rows.ravel())
    ]
    return np.concatenate(pieces).astype(np.int64, copy=False)


def unpack(packed: Int64Array) -> list[ProbeState]:
    """Take states apart."""
    states = []
    while len(packed):
        stop = 3 + 5 * int(packed[0])
        rows = packed[3:stop].reshape(-1, 5)
        states.append(ProbeState(rows, packed[1:3].copy().view(np.float64)))
        packed = packed[stop:]
    return states
