"""A rank's stretch of a range of a line that is to be divided under a bottleneck."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.kernels.curve import chunks as kernel
from sfcpart.methods.curve.line import Line
from sfcpart.methods.curve.probe_state import ProbeState

__all__ = ["Stage", "Stretch"]


@dataclass(frozen=True, eq=False)
class Stage:
    """A range of a line with what must be kept under any bottleneck.

    Attributes
    ----------
    line : Line
    begin, end : int
        The range.
    least : int
        Items a part takes at least.
    speed : (P,) float64
    limit : (P,) int64
        The most limited weight of each part.
    heavy : (k,) int64
        Positions whose next `least` items may be too much for a part.
    edge_sums : (2, 2) int64
        Weight and limited weight before `begin` and `end`.
    speed_sums : (P + 1,) float64
        Speeds of the parts before each cut.
    limit_sums : (P + 1,) int64
        The most limited weight before each cut, rounded up, from the begin of the line on.
    """

    line: Line
    begin: int
    end: int
    least: int
    speed: FloatArray
    limit: Int64Array
    heavy: Int64Array
    edge_sums: Int64Array
    speed_sums: FloatArray = field(init=False)
    limit_sums: Int64Array = field(init=False)

    def __post_init__(self) -> None:
        first, last = self.edge_sums[:, 1]
        most = np.append(0.0, np.cumsum(self.limit, dtype=np.float64)) * (1 + 1e-9) + 1
        sums = first + np.minimum(most, last - first).astype(np.int64)
        object.__setattr__(self, "speed_sums", np.append(0.0, np.cumsum(self.speed)))
        object.__setattr__(self, "limit_sums", sums)

    @property
    def weight(self) -> int:
        """Weight of all items of the range."""
        return int(self.edge_sums[1, 0] - self.edge_sums[0, 0])

    def beyond(self, bottleneck: float) -> float:
        """Return the least quotient above a bottleneck that any chunk may have."""
        speed, most = np.unique(self.speed), max(self.weight, 1)
        cap = kernel.caps(bottleneck, speed, most)
        return float(np.where(cap < most, (cap + 1) / speed, np.inf).min())


@dataclass(eq=False)
class Stretch:
    """One rank's stretch, with the intervals of good positions that the last sweep found.

    Attributes
    ----------
    stage : Stage
    bottleneck : float
    beyond : float
        The least larger one that any chunk may have.
    own_ptr, own : (P + 2,), (n, 3) int64
        Intervals, as `kernels.curve.chunks.sweep_back` writes them.
    """

    stage: Stage
    bottleneck: float
    beyond: float
    own_ptr: Int64Array = field(init=False)
    own: Int64Array = field(init=False)

    def __post_init__(self) -> None:
        self.own_ptr = np.zeros(self.n_parts + 2, np.int64)
        self.own = np.empty((0, 3), np.int64)

    @property
    def n_parts(self) -> int:
        """Number of parts."""
        return len(self.stage.speed)

    @property
    def line(self) -> Line:
        """The line."""
        return self.stage.line

    @property
    def begin(self) -> int:
        """Begin of the range."""
        return self.stage.begin

    @property
    def end(self) -> int:
        """End of the range."""
        return self.stage.end

    @property
    def first(self) -> int:
        """First position of the range on this rank."""
        return self.line.own_part(self.stage.begin, self.stage.end)[0]

    @property
    def last(self) -> int:
        """Position after the last one on this rank."""
        return self.line.own_part(self.stage.begin, self.stage.end)[1]

    def __len__(self) -> int:
        """Return how many positions of the range are this rank's."""
        return self.last - self.first

    @property
    def span(self) -> Int64Array:
        """What kernels need to know of the stretch (`sweep_back`)."""
        stage = self.stage
        return np.array(
            [
                self.first,
                self.last,
                self.line.first,
                stage.least,
                stage.begin,
                max(stage.weight, 1),
                stage.edge_sums[0, 0],
            ],
            np.int64,
        )

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
        stage, span, brackets = self.stage, self.span, came.brackets.copy()
        n_own, capacity = -1, 2 * min(self.n_parts, len(self)) + 64
        while n_own < 0:
            own = np.empty((capacity, 3), np.int64)
            self.own_ptr = np.zeros(self.n_parts + 2, np.int64)
            n_own = kernel.sweep_back(
                span, self.line.total, self.line.limit, self.bottleneck, stage.limit, stage.speed,
                stage.heavy, stage.speed_sums, stage.limit_sums, self.beyond, came.rows, brackets,
                self.own_ptr, own,
            )  # fmt: skip
            capacity *= 4
        self.own = own
        out = np.empty((n_own + len(came.rows), 5), np.int64)
        n_out = kernel.pass_on(
            span, self.line.total, self.line.limit, self.bottleneck, stage.limit, stage.speed,
            came.rows, own, n_own, brackets, out,
        )  # fmt: skip
        return ProbeState(out[:n_out], brackets)

    def pick(self, part: int, origin: Int64Array, wanted: int) -> tuple[int, int]:
        """Return the best ends of a chunk here: last one <= wanted, first one above; or -1."""
        if not len(self):
            return -1, -1
        stage = self.stage
        near, above = kernel.pick(
            part, origin, wanted, self.span, self.line.total, self.line.limit, self.bottleneck,
            stage.limit, stage.speed, self.own_ptr, self.own,
        )  # fmt: skip
        return int(near), int(above)

    def walk(self, part: int, origin: Int64Array, wanted: Int64Array, cut: Int64Array) -> int:
        """Choose ends of chunks from `part` on without doubt; return the first that is left.

        `origin` and `cut` are changed.
        """
        stage = self.stage
        return int(kernel.walk_forward(
            part, origin, wanted, self.span, self.line.total, self.line.limit, self.bottleneck,
            stage.limit, stage.speed, self.own_ptr, self.own, cut,
        ))  # fmt: skip

    def ends_here(self, part: int, origin: Int64Array, wanted: int) -> bool:
        """Tell whether no better end of a chunk can lie beyond this stretch."""
        stage = self.stage
        _, total, limit = self.sums_before(self.last)
        cap = kernel.cap_of(self.bottleneck, float(stage.speed[part]), max(stage.weight, 1))
        return bool(
            wanted < self.last or total - origin[1] > cap or limit - origin[2] > stage.limit[part]
        )
