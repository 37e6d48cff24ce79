"""Paths through a timetable: what a rule makes of a run, and the best that anyone could have done.

The best set of re-splits is found by a quadratic dynamic programme over the frame of the last one:
best[k] = min over i < k of best[i] + steps of frames i to k - 1 with the split of i + cost[i, k]
(A. Boulmier, N. Abdennadher, B. Chopard, arXiv:2104.01688, 2021).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.resplit.policies import Every, Rule
from sfcpart.resplit.timetable import Timetable

__all__ = ["Path", "best_period", "follow", "hindsight", "path_of"]


@dataclass(frozen=True, eq=False)
class Path:
    """A run with re-splits in some frames.

    Attributes
    ----------
    resplits : tuple of int
        Frames before which it re-splits, ascending; frame 0 has the first split.
    split : (n_frames,) int64
        Frame whose split each frame uses.
    step_seconds, resplit_seconds : float
        Predicted seconds of all steps, and of all re-splits.
    moved_bytes : float
    imbalance : (n_frames,) float64
    """

    resplits: tuple[int, ...]
    split: Int64Array
    step_seconds: float
    resplit_seconds: float
    moved_bytes: float
    imbalance: FloatArray

    @property
    def seconds(self) -> float:
        """Predicted seconds of the run; the first split, which all have, is left out."""
        return self.step_seconds + self.resplit_seconds


def path_of(table: Timetable, resplits: Sequence[int]) -> Path:
    """Add up the run that re-splits before the given frames (ascending, none of them 0)."""
    starts = np.array([0, *resplits], np.int64)
    frame = np.arange(table.n_frames)
    split = starts[np.searchsorted(starts, frame, side="right") - 1]
    pairs = list(zip(starts[:-1].tolist(), starts[1:].tolist(), strict=True))
    return Path(
        resplits=tuple(int(k) for k in resplits),
        split=split,
        step_seconds=float((table.slowest[split, frame] * table.steps).sum()),
        resplit_seconds=float(sum(table.cost[i, k] for i, k in pairs)),
        moved_bytes=float(sum(table.moved_bytes[i, k] for i, k in pairs)),
        imbalance=table.imbalance[split, frame],
    )


def follow(
    table: Timetable, start: Callable[[float], Rule], *, seen: FloatArray | None = None
) -> Path:
    """Let a rule decide after every frame from what was measured so far.

    Parameters
    ----------
    table : Timetable
    start : callable
        Makes the rule from the cost of a re-split as guessed at the begin: that of re-splitting in
        the second frame.
    seen : (n_frames, n_frames) float64, optional
        The slowest rank as the rule sees it (with noise, say); as it is by default.
    """
    if table.n_frames == 1:
        return path_of(table, [])
    seen = table.slowest if seen is None else seen
    rule, split, resplits = start(float(table.cost[0, 1])), 0, []
    for k in range(table.n_frames - 1):
        steps = int(table.steps[k])
        if rule.after_step(steps * float(seen[split, k]), steps * float(table.mean[split, k])):
            rule.after_resplit(float(table.cost[split, k + 1]))
            split = k + 1
            resplits.append(split)
    return path_of(table, resplits)


def best_period(table: Timetable) -> tuple[int, Path]:
    """Return the fixed period that is best for this run, and its path; the longest of equal ones.

    The period is the number of frames if not re-splitting at all is best.
    """
    paths = [follow(table, lambda _, p=p: Every(p)) for p in range(1, table.n_frames + 1)]  # type: ignore[misc]
    seconds = [path.seconds for path in paths]
    best = max(k for k, value in enumerate(seconds) if value == min(seconds))
    return best + 1, paths[best]


def hindsight(table: Timetable) -> Path:
    """Return the best path there is.

    Notes
    -----
    O(n_frames^2); of equal paths, the one whose last re-splits are earliest.
    """
    n = table.n_frames
    done = np.zeros((n, n + 1))  # done[i, k]: frames i to k - 1 with the split of i
    done[:, 1:] = np.cumsum(np.nan_to_num(table.slowest) * table.steps, axis=1)
    best, origin = np.zeros(n), np.full(n, -1)
    for k in range(1, n):
        total = best[:k] + done[:k, k] + table.cost[:k, k]
        origin[k] = int(np.argmin(total))
        best[k] = total[origin[k]]
    last = int(np.argmin(best + done[:, n]))
    resplits: list[int] = []
    while last > 0:
        resplits.insert(0, last)
        last = int(origin[last])
    return path_of(table, resplits)
