"""Runs as tables drawn at random, and the best re-splits by trying all of them."""

from __future__ import annotations

from itertools import combinations

import numpy as np

from sfcpart.resplit.timetable import Timetable


def drawn_table(rng: np.random.Generator, n_frames: int) -> Timetable:
    """Draw a table in which steps with older splits tend to take longer."""
    i, k = np.indices((n_frames, n_frames))
    age = np.clip(k - i, 0, None)
    mean = np.broadcast_to(rng.uniform(0.5, 1.5, n_frames), (n_frames, n_frames))
    slowest = mean * (1 + rng.uniform(0, 0.3) * age * rng.uniform(0.5, 1.5, age.shape))
    cost = rng.uniform(0.1, 3.0) * rng.uniform(0.5, 1.5, age.shape)
    later, none = k >= i, np.nan
    return Timetable(
        slowest=np.where(later, slowest, none),
        mean=np.where(later, mean, none),
        imbalance=np.where(later, slowest / mean - 1, none),
        cost=np.where(k > i, cost, none),
        moved_bytes=np.where(k > i, 100.0 * cost, none),
        steps=rng.integers(1, 4, n_frames),
        n_cells=np.full(n_frames, 10),
        n_parts=4,
    )


def aging_table(n_frames: int, loss: np.ndarray, cost: float) -> Timetable:
    """Return the run in which step n after a split loses `loss[n]`, whenever it was."""
    i, k = np.indices((n_frames, n_frames))
    later = k >= i
    slowest = np.where(later, 1.0 + loss[np.clip(k - i, 0, None)], np.nan)
    return Timetable(
        slowest=slowest,
        mean=np.where(later, 1.0, np.nan),
        imbalance=slowest - 1.0,
        cost=np.where(k > i, cost, np.nan),
        moved_bytes=np.where(k > i, 1.0, np.nan),
        steps=np.ones(n_frames, np.int64),
        n_cells=np.ones(n_frames, np.int64),
        n_parts=2,
    )


def seconds_of(table: Timetable, resplits: tuple[int, ...]) -> float:
    """Walk through the frames one by one."""
    split, total = 0, 0.0
    for k in range(len(table.steps)):
        if k in resplits:
            total += table.cost[split, k]
            split = k
        total += table.steps[k] * table.slowest[split, k]
    return total


def least_seconds(table: Timetable) -> float:
    """Try every set of frames."""
    frames = range(1, len(table.steps))
    sets = (some for size in range(len(table.steps)) for some in combinations(frames, size))
    return min(seconds_of(table, some) for some in sets)
