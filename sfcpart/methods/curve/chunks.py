"""Contiguous chunks of a line with the exact least bottleneck.

The bottleneck of a division is the largest float64 quotient of a chunk's weight and its part's
speed. Parametric search: each probe tells whether a bottleneck can be kept and, from the
comparisons it made, the next larger and next smaller values that would change its course, so that
the search only tries values some chunk can have, and ends at the exact least one (A. Pinar,
C. Aykanat, JPDC 64:974 (2004); parts of different speed in fixed order: A. Pinar, E. Tabak,
C. Aykanat, JPDC 68:1473 (2008)). Among the divisions that keep it, cuts lie as near to their fair
positions as they can, from the left.

A probe walks the stretches of the line from the last rank to the first; several bottlenecks are
tried in one walk when there are several ranks. Only lists of P intervals travel.

Cost: about log2(w_max) probes of O(P log n) each.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.errors import PartitionError
from sfcpart.kernels.curve import chunks as kernel
from sfcpart.methods.curve.chunk_bounds import Bounds
from sfcpart.methods.curve.fair import fair_positions
from sfcpart.methods.curve.line import Line
from sfcpart.methods.curve.probe_state import ProbeState

__all__ = ["cut_line"]

_UNLIMITED = np.iinfo(np.int64).max


def cut_line(
    line: Line,
    *,
    begin: int,
    end: int,
    speed: FloatArray,
    limit: Int64Array | None = None,
    least: int = 1,
) -> Int64Array:
    """Divide the items [begin, end) of a line among parts, in order, with least bottleneck.

    Parameters
    ----------
    line : Line
    begin, end : int
    speed : (P,) float64, > 0
    limit : (P,) int64, optional
        The most limited weight each part may hold.
    least : int
        Items a part takes at least; the line must have reach `max(1, least)`.

    Returns
    -------
    (P + 1,) int64
        Part p takes the items [cut[p], cut[p + 1]).

    Raises
    ------
    PartitionError
        If the limits, or `least`, cannot be kept by any contiguous division.
    """
    task = _Task.of(line, begin, end, speed, limit, least)
    if begin == end:
        return np.full(len(speed) + 1, begin, np.int64)
    return task.place_cuts(task.least_bottleneck())


@dataclass(eq=False)
class _Task:
    """One range of a line to divide, with what all probes share."""

    line: Line
    begin: int
    end: int
    speed: FloatArray
    limit: Int64Array
    least: int
    edge_sums: Int64Array
    bounds: Bounds

    @classmethod
    def of(
        cls,
        line: Line,
        begin: int,
        end: int,
        speed: FloatArray,
        limit: Int64Array | None,
        least: int,
    ) -> _Task:
        """Find the bounds of the bottleneck and the items that may be too heavy for a part."""
        most = np.full(len(speed), _UNLIMITED) if limit is None else limit
        sums = line.sums_at(np.array([begin, end], np.int64))
        weight = int(sums[1, 0] - sums[0, 0])
        bounds = Bounds.of(line, begin, end, speed=speed, limit=most, least=least, weight=weight)
        return cls(line, begin, end, speed, most, least, sums, bounds)

    @property
    def weight(self) -> int:
        """Weight of all items of the range."""
        return int(self.edge_sums[1, 0] - self.edge_sums[0, 0])

    def least_bottleneck(self) -> float:
        """Return the least bottleneck that some division keeps."""
        low, high = self.bounds.lowest, np.inf
        top = max(self.weight / float(self.speed.min()), low)
        ladder = [low, low + self.bounds.widest, min(low + 8 * self.bounds.widest, top), top]
        n_tries = min(self.line.comm.size, 8)
        while low < high:
            if ladder:
                tries = [b for b in ladder[:n_tries] if b >= low] or [top]
                del ladder[:n_tries]
            else:
                tries = _between(low, high, n_tries)
            for bottleneck, state in zip(tries, self._probe(tries), strict=True):
                larger, smaller = state.brackets
                if state.good_start(self.begin):
                    high = min(high, max(low, float(smaller)))
                elif bottleneck >= top or not np.isfinite(larger):
                    self._refuse()
                else:
                    low = max(low, float(larger))
            if high < np.inf:
                ladder.clear()
        return float(low)

    def _ranks(self) -> list[int]:
        """Return the ranks that hold items of the range, last first."""
        offset = self.line.offset
        holds = (offset[:-1] < self.end) & (offset[1:] > self.begin) & (offset[:-1] < offset[1:])
        return [int(r) for r in np.flatnonzero(holds)[::-1]]

    def _first_states(self, count: int) -> list[ProbeState]:
        """Return what is known beyond the end: the line may end there."""
        n_parts = len(self.speed)
        at_end = np.array([[self.end, self.end, *self.edge_sums[1]]], np.int64)
        ptr = np.zeros(n_parts + 2, np.int64)
        ptr[-1] = 1
        if self.least == 0:  # parts after the last item may be empty
            ptr = np.arange(n_parts + 2)
            at_end = np.repeat(at_end, n_parts + 1, axis=0)
        brackets = np.array([np.inf, 0.0])
        return [ProbeState(ptr, at_end, brackets.copy()) for _ in range(count)]

    def _probe(self, bottlenecks: list[float]) -> list[ProbeState]:
        """Sweep the range from its end for each bottleneck; every rank gets the last states."""
        states = self._first_states(len(bottlenecks))
        for rank in self._ranks():
            packed = None
            if rank == self.line.comm.rank:
                swept = zip(bottlenecks, states, strict=True)
                packed = np.concatenate([self._sweep(b, state)[0].pack() for b, state in swept])
            packed = self.line.comm.bcast(packed, root=rank)
            states = ProbeState.unpack(packed, len(self.speed), len(bottlenecks))
        return states

    def _caps(self, bottleneck: float) -> Int64Array:
        """Return the most weight each part may hold under a bottleneck."""
        return kernel.caps(bottleneck, self.speed, max(self.weight, 1))

    def _span(self) -> Int64Array:
        """Return this rank's positions of the range, its base and the least number of items."""
        return np.array(
            [*self.line.own_part(self.begin, self.end), self.line.first, self.least], np.int64
        )

    def _sweep(
        self, bottleneck: float, came: ProbeState
    ) -> tuple[ProbeState, Int64Array, Int64Array]:
        """Sweep this rank's stretch; return what the lower ranks need, and the own intervals."""
        n_parts = len(self.speed)
        own_ptr = np.zeros(n_parts + 2, np.int64)
        capacity, n_own = 2 * n_parts + 64, -1
        while n_own < 0:
            own = np.empty((capacity, 2), np.int64)
            brackets = came.brackets.copy()
            n_own = kernel.sweep_back(
                self._span(), self.line.total, self.line.limit, self._caps(bottleneck),
                self.limit, self.speed, self.bounds.heavy, came.ptr, came.rows, brackets,
                own_ptr, own,
            )  # fmt: skip
            capacity *= 4
        out = np.empty((n_own + len(came.rows), 4), np.int64)
        ptr = np.empty(n_parts + 2, np.int64)
        n_out = kernel.pass_on(
            self._span(), self.line.total, self.line.limit,
            came.ptr, came.rows, own_ptr, own, ptr, out,
        )  # fmt: skip
        return ProbeState(ptr, out[:n_out], brackets), own_ptr, own

    def place_cuts(self, bottleneck: float) -> Int64Array:
        """Return cuts that keep the bottleneck, each as near to its fair position as it can."""
        comm, n_parts = self.line.comm, len(self.speed)
        own_ptr, own = self._own_intervals(bottleneck)
        stretch = (self._span(), self.line.total, self.line.limit, self._caps(bottleneck),
                   self.limit, own_ptr, own)  # fmt: skip
        wanted = fair_positions(
            self.line,
            begin=self.begin,
            end=self.end,
            edge_sums=self.edge_sums,
            speed=self.speed,
            least=self.least,
        )
        cut = np.full(n_parts + 1, self.end, np.int64)
        cut[0] = self.begin
        part, origin = 0, np.array([self.begin, *self.edge_sums[0]], np.int64)
        while part < n_parts - 1:
            home = int(np.searchsorted(self.line.offset, origin[0], side="right")) - 1
            home = min(home, comm.size - 1)
            token = None
            if comm.rank == home:
                part = kernel.walk_forward(part, origin, wanted, *stretch, cut)
                token = np.concatenate(([part], origin, cut))
            token = comm.bcast(token, root=home)
            part, origin, cut = int(token[0]), token[1:4].copy(), token[4:].copy()
            if part < n_parts - 1:
                origin = self._agree(kernel.pick(part, origin, wanted[part + 1], *stretch))
                part += 1
                cut[part] = origin[0]
        return cut

    def _own_intervals(self, bottleneck: float) -> tuple[Int64Array, Int64Array]:
        """Sweep once more; return this rank's intervals of good positions by part."""
        comm, n_parts = self.line.comm, len(self.speed)
        own_ptr, own = np.zeros(n_parts + 2, np.int64), np.empty((0, 2), np.int64)
        state = self._first_states(1)[0]
        for rank in self._ranks():
            packed = None
            if rank == comm.rank:
                state, own_ptr, own = self._sweep(bottleneck, state)
                packed = state.pack()
            state = ProbeState.unpack(comm.bcast(packed, root=rank), n_parts, 1)[0]
        return own_ptr, own

    def _agree(self, ends: tuple[int, int]) -> Int64Array:
        """Choose among the ends found by all ranks; return it with the sums before it."""
        rows = np.zeros((2, 3), np.int64)
        for row, at in zip(rows, ends, strict=True):
            row[0] = at
            if at >= 0:
                row[1] = kernel.sum_before(self.line.total, at, self.line.first)
                row[2] = kernel.limit_before(self.line.limit, at, self.line.first)
        found = np.stack(self.line.comm.allgather(rows))
        near, above = found[:, 0], found[:, 1]
        if np.any(near[:, 0] >= 0):
            return np.asarray(near[np.argmax(near[:, 0])]).copy()
        above = above[above[:, 0] >= 0]
        if len(above):
            return np.asarray(above[np.argmin(above[:, 0])]).copy()
        return np.array([self.end, *self.edge_sums[1]], np.int64)  # only empty parts follow

    def _refuse(self) -> None:
        """Raise the error for limits that cannot be kept, saying what would be needed."""
        n_items, n_parts = self.end - self.begin, len(self.speed)
        if n_items < self.least * n_parts:
            raise PartitionError(
                f"{n_items} items cannot give {n_parts} parts {self.least} each; ask for fewer"
            )
        swap = Line(self.line.comm, self.line.offset, self.line.limit, np.empty(0, np.int64))
        positive = np.maximum(self.limit, 1).astype(np.float64)
        factor = _Task.of(swap, self.begin, self.end, positive, None, self.least).least_bottleneck()
        need = int(self.edge_sums[1, 1] - self.edge_sums[0, 1]) * self.line.limit_unit
        may_hold = sum(map(int, self.limit)) * self.line.limit_unit
        raise PartitionError(
            f"the limits cannot be kept by contiguous parts: the cells need {need:.10g} in all, "
            f"the {n_parts} parts may hold {may_hold:.10g}; limits {factor:.6g} times as large "
            "would do; raise them or ask for more parts"
        )


def _between(low: float, high: float, count: int) -> list[float]:
    """Return up to `count` floats in [low, high), evenly spaced among the floats there are."""
    ends = np.array([low, high]).view(np.int64)
    gap = int(ends[1]) - int(ends[0])
    steps = sorted({int(ends[0]) + gap * i // (count + 1) for i in range(1, count + 1)})
    return [float(b) for b in np.array(steps, np.int64).view(np.float64)]
