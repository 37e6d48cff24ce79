"""A rank's stretch of a range of a line that is to be divided under a bottleneck."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.kernels.curve import chunks as kernel
from sfcpart.methods.curve.line import Line
from sfcpart.methods.curve.probe_state import ProbeState

__all__ = ["Stretch"]


@dataclass(eq=False)
class Stretch:
    """One rank's stretch, with the intervals of good positions that the last sweep found.

    Attributes
    ----------
    line : Line
    begin, end : int
        The range.
    least : int
        Items a part takes at least.
    cap, limit : (P,) int64
        The most weight and limited weight of each part.
    speed : (P,) float64
    heavy : (k,) int64
        Positions whose next `least` items may be too much for a part.
    edge_sums : (2, 2) int64
        Weight and limited weight before `begin` and `end`.
    reach : (P + 1, 2) int64
        The most of both that can be before each cut.
    beyond : float
        The least quotient of a chunk that `cap` does not allow.
    own_ptr, own : (P + 2,), (n, 3) int64
        Intervals, as `kernels.curve.chunks.sweep_back` writes them.
    """

    line: Line
    begin: int
    end: int
    least: int
    cap: Int64Array
    limit: Int64Array
    speed: FloatArray
    heavy: Int64Array
    edge_sums: Int64Array
    reach: Int64Array = field(init=False)
    beyond: float = field(init=False)
    own_ptr: Int64Array = field(init=False)
    own: Int64Array = field(init=False)

    def __post_init__(self) -> None:
        self.own_ptr = np.zeros(len(self.cap) + 2, np.int64)
        self.own = np.empty((0, 3), np.int64)
        most = np.stack([self.cap, self.limit], axis=1).astype(np.float64).cumsum(axis=0)
        whole = self.edge_sums[1] - self.edge_sums[0]
        held = np.minimum(most * (1 + 1e-9) + 1, whole)  # rounded up: too much does no harm
        self.reach = self.edge_sums[0] + np.append(np.zeros((1, 2), np.int64), held, axis=0)
        self.reach = self.reach.astype(np.int64)
        larger = np.where(self.cap < whole[0], (self.cap + 1) / self.speed, np.inf)
        self.beyond = float(larger.min())

    @property
    def first(self) -> int:
        """First position of the range on this rank."""
        return self.line.own_part(self.begin, self.end)[0]

    @property
    def last(self) -> int:
        """Position after the last one on this rank."""
        return self.line.own_part(self.begin, self.end)[1]

    def __len__(self) -> int:
        """Return how many positions of the range are this rank's."""
        return self.last - self.first

    @property
    def span(self) -> Int64Array:
        """First, last, base of the sums, least number of items, begin of the range."""
        return np.array([self.first, self.last, self.line.first, self.least, self.begin], np.int64)

    def sums_before(self, at: int) -> Int64Array:
        """Return a position of this stretch with the weight and limited weight before it."""
        total = kernel.sum_before(self.line.total, at, self.line.first)
        return np.array(
            [at, total, kernel.limit_before(self.line.limit, at, self.line.first)], np.int64
        )

    def sweep(self, came: ProbeState) -> ProbeState:
        """Find the good positions; return what the stretch before needs to know."""
        if not len(self):
            return came
        brackets = came.brackets.copy()
        n_own, capacity = -1, 2 * min(len(self.cap), len(self)) + 64
        while n_own < 0:
            own = np.empty((capacity, 3), np.int64)
            self.own_ptr = np.zeros(len(self.cap) + 2, np.int64)
            n_own = kernel.sweep_back(
                self.span, self.line.total, self.line.limit, self.cap, self.limit, self.speed,
                self.heavy, self.reach, self.beyond, came.rows, brackets, self.own_ptr, own,
            )  # fmt: skip
            capacity *= 4
        self.own = own
        out = np.empty((n_own + len(came.rows), 5), np.int64)
        n_out = kernel.pass_on(
            self.span, self.line.total, self.line.limit, self.cap, self.limit, self.speed,
            came.rows, own, n_own, brackets, out,
        )  # fmt: skip
        return ProbeState(out[:n_out], brackets)

    def pick(self, part: int, origin: Int64Array, wanted: int) -> tuple[int, int]:
        """Return the best ends of a chunk here: last one <= wanted, first one above; or -1."""
        if not len(self):
            return -1, -1
        near, above = kernel.pick(
            part, origin, wanted, self.span, self.line.total, self.line.limit, self.cap,
            self.limit, self.own_ptr, self.own,
        )  # fmt: skip
        return int(near), int(above)

    def ends_here(self, part: int, origin: Int64Array, wanted: int) -> bool:
        """Tell whether no better end of a chunk can lie beyond this stretch."""
        _, total, limit = self.sums_before(self.last)
        return bool(
            wanted < self.last
            or total - origin[1] > self.cap[part]
            or limit - origin[2] > self.limit[part]
        )
