"""Contiguous chunks of a line with the exact least bottleneck.

The bottleneck of a division is the largest float64 quotient of a chunk's weight and its part's
speed. Parametric search: each probe tells whether a bottleneck can be kept and, from the
comparisons it made, the next larger and next smaller values that would change its course, so that
the search only tries values some chunk can have, and ends at the exact least one (A. Pinar,
C. Aykanat, JPDC 64:974 (2004); parts of different speed in fixed order: A. Pinar, E. Tabak,
C. Aykanat, JPDC 68:1473 (2008)). Among the divisions that keep it, cuts lie as near to their fair
positions as they can, from the left.

A probe walks the stretches of the line from the last rank to the first, and in the end one walk
goes forward (`Comm.relay`). A rank gets from its neighbour what can be reached from its stretch: a
few intervals, whatever the number of ranks and parts. Several bottlenecks are tried in one walk
when there are several ranks. `tools/ranks/` counts rounds and bytes.

Cost: about log2(w_max) probes of O(P log n) each on one rank; on R ranks log(w_max) / log(R + 1)
walks of R steps (R at most 32 there), each of O(log n) for each cut that can lie on a stretch.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.errors import PartitionError
from sfcpart.methods.curve.abreast import Ask, Asking, answered
from sfcpart.methods.curve.chunk_bounds import Bounds
from sfcpart.methods.curve.fair import fair_positions
from sfcpart.methods.curve.line import Line
from sfcpart.methods.curve.placing import place_cuts
from sfcpart.methods.curve.probe_state import ProbeState, pack, unpack
from sfcpart.methods.curve.stretch import Stage, Stretch

__all__ = ["cut_line", "cutting"]

_UNLIMITED = np.iinfo(np.int64).max
_TRIES = 32
"""Bottlenecks that are tried in one walk along the ranks, if there are as many ranks."""


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
    task = cutting(line, begin=begin, end=end, speed=speed, limit=limit, least=least)
    return answered(line.comm, [task])[0]


def cutting(
    line: Line,
    *,
    begin: int,
    end: int,
    speed: FloatArray,
    limit: Int64Array | None = None,
    least: int = 1,
) -> Asking[Int64Array]:
    """Ask for what `cut_line` returns: a task that may run beside others (`answered`)."""
    task = yield from _Task.asked(line, begin, end, speed, limit, least)
    if begin == end:
        return np.full(len(speed) + 1, begin, np.int64)
    bottleneck = yield from task.least_bottleneck()
    return (yield from task.place_cuts(bottleneck))


@dataclass(frozen=True, eq=False)
class _Task:
    """One range of a line to divide, with what can be said before any probe."""

    stage: Stage
    bounds: Bounds

    @classmethod
    def asked(
        cls,
        line: Line,
        begin: int,
        end: int,
        speed: FloatArray,
        limit: Int64Array | None,
        least: int,
    ) -> Asking[_Task]:
        """Find the bounds of the bottleneck and the items that may be too heavy for a part."""
        most = np.full(len(speed), _UNLIMITED) if limit is None else limit
        sums = yield from line.ask_sums(np.array([begin, end], np.int64))
        weight = int(sums[1, 0] - sums[0, 0])
        bounds = yield from Bounds.asked(
            line, begin, end, speed=speed, limit=most, least=least, weight=weight
        )
        return cls(Stage(line, begin, end, least, speed, most, bounds.heavy, sums), bounds)

    def least_bottleneck(self) -> Asking[float]:
        """Return the least bottleneck that some division keeps."""
        low, high = self.bounds.lowest, np.inf
        top = max(self.stage.weight / float(self.stage.speed.min()), low)
        step = self.bounds.widest
        ladder = [low, low + step, min(low + 8 * step, top), top]
        n_tries = min(self.stage.line.comm.size, _TRIES)
        n_rungs = min(n_tries, 2)  # high rungs are dear: many cuts can be reached from anywhere
        while low < high:
            tries = _between(low, high, n_tries) if not ladder else []
            if ladder:
                tries = [b for b in ladder[:n_rungs] if b >= low] or [top]
                tries += _between(low, tries[-1], n_tries - len(tries)) if low < tries[-1] else []
                del ladder[:n_rungs]
                n_rungs = 1
            states = yield from self._probe(tries)
            for bottleneck, state in zip(tries, states, strict=True):
                larger, smaller = state.brackets
                if state.good_start(self.stage.begin):
                    high = min(high, max(low, float(smaller)))
                elif bottleneck >= top or not np.isfinite(larger):
                    yield from self._refuse()
                else:
                    low = max(low, float(larger))
            if high < np.inf:
                ladder.clear()
        return float(low)

    def _first_state(self) -> ProbeState:
        """Return what is known beyond the end: the line may end there."""
        stage, n_parts = self.stage, len(self.stage.speed)
        cut = np.arange(
            n_parts if stage.least else 0, n_parts + 1
        )  # empty parts may follow the end
        rows = np.empty((len(cut), 5), np.int64)
        rows[:, 0], rows[:, 1:3], rows[:, 3:] = cut, stage.end, stage.edge_sums[1]
        return ProbeState(rows, np.array([np.inf, 0.0]))

    def _probe(self, bottlenecks: list[float]) -> Asking[list[ProbeState]]:
        """Sweep the range from its end for each bottleneck; every rank gets the last states."""
        beyond = [self.stage.beyond(bottleneck) for bottleneck in bottlenecks]

        def sweep(packed: Int64Array) -> Int64Array:
            came = zip(bottlenecks, beyond, unpack(packed), strict=True)
            return pack([Stretch(self.stage, b, more).sweep(state) for b, more, state in came])

        first = pack([self._first_state()] * len(bottlenecks))
        return unpack((yield Ask("first", first, sweep)))

    def place_cuts(self, bottleneck: float) -> Asking[Int64Array]:
        """Return cuts that keep the bottleneck, each as near to its fair position as it can."""
        stage = self.stage
        here = Stretch(stage, bottleneck, stage.beyond(bottleneck))
        first = pack([self._first_state()])
        yield Ask("first", first, lambda packed: pack([here.sweep(unpack(packed)[0])]))
        wanted = yield from fair_positions(
            stage.line,
            begin=stage.begin,
            end=stage.end,
            edge_sums=stage.edge_sums,
            speed=stage.speed,
            least=stage.least,
        )
        origin = np.array([stage.begin, *stage.edge_sums[0]], np.int64)
        return (yield from place_cuts(here, wanted, origin=origin))

    def _refuse(self) -> Asking[None]:
        """Raise the error for limits that cannot be kept, saying what would be needed."""
        stage, line = self.stage, self.stage.line
        n_items, n_parts = stage.end - stage.begin, len(stage.speed)
        if n_items < stage.least * n_parts:
            raise PartitionError(
                f"{n_items} items cannot give {n_parts} parts {stage.least} each; ask for fewer"
            )
        swap = Line(line.comm, line.offset, line.limit, np.empty(0, np.int64))
        positive = np.maximum(stage.limit, 1).astype(np.float64)
        scaled = yield from _Task.asked(swap, stage.begin, stage.end, positive, None, stage.least)
        factor = yield from scaled.least_bottleneck()
        need = int(stage.edge_sums[1, 1] - stage.edge_sums[0, 1]) * line.limit_unit
        may_hold = sum(map(int, stage.limit)) * line.limit_unit
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
