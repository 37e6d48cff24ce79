"""What travels with a probe of the least bottleneck (`sfcpart.methods.curve.chunks`)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array

__all__ = ["ProbeState"]


@dataclass(eq=False)
class ProbeState:
    """What a probe knows beyond a stretch: intervals of good positions by part, and brackets."""

    ptr: Int64Array
    rows: Int64Array
    brackets: FloatArray

    def pack(self) -> Int64Array:
        """Return everything in one array."""
        parts = ([len(self.rows)], self.brackets.view(np.int64), self.ptr, self.rows.ravel())
        return np.concatenate(parts).astype(np.int64)

    @staticmethod
    def unpack(packed: Int64Array, n_parts: int, count: int) -> list[ProbeState]:
        """Take `count` states apart."""
        states = []
        for _ in range(count):
            at = 3 + n_parts + 2
            stop = at + 4 * int(packed[0])
            rows = packed[at:stop].reshape(-1, 4)
            states.append(ProbeState(packed[3:at], rows, packed[1:3].copy().view(np.float64)))
            packed = packed[stop:]
        return states

    def good_start(self, begin: int) -> bool:
        """Tell whether the whole line can be divided from `begin`."""
        return bool(np.any(self.rows[self.ptr[0] : self.ptr[1], 0] == begin))
