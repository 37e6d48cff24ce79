"""Least bottleneck of contiguous divisions, by trying every cut (dynamic programming)."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from math import inf

import numpy as np

__all__ = ["bottleneck_of", "lattice_cut", "least_bottleneck"]


def least_bottleneck(
    weight: Sequence[int],
    speed: Sequence[float],
    *,
    limit_weight: Sequence[int] | None = None,
    limit: Sequence[int] | None = None,
    least: int = 1,
) -> float:
    """Return the least bottleneck of all divisions, `inf` if there is none."""
    n = len(weight)
    best = [0.0] + [inf] * n
    for part, s in enumerate(speed):
        longer = [inf] * (n + 1)
        for begin in range(n + 1):
            for end in range(begin + least, n + 1):
                if limit is not None and sum(limit_weight[begin:end]) > limit[part]:
                    break
                load = sum(int(w) for w in weight[begin:end]) / s
                longer[end] = min(longer[end], max(best[begin], load))
        best = longer
    return best[n]


def bottleneck_of(cut: Sequence[int], weight: Sequence[int], speed: Sequence[float]) -> float:
    """Return the bottleneck of a division."""
    loads = [sum(int(w) for w in weight[a:b]) for a, b in pairwise(cut)]
    return max(load / s for load, s in zip(loads, speed, strict=True))


def lattice_cut(part: np.ndarray) -> int:
    """Count the faces between parts of a full grid, whose array has the shape of the grid."""
    return sum(int(np.count_nonzero(np.diff(part, axis=axis))) for axis in range(part.ndim))
