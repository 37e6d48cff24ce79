"""A tidal front sweeps the channel from end to end; cells are small where it is.

The box is 2n x n x n unit cubes. The front is a surface across the channel, bent and swaying with
the tide; it comes in from outside at the begin and has left at the end. A cube is halved again and
again near the front, so that neighbours differ by one level at most (hanging nodes).
"""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from sfcpart.files.series.frame import Frame
from tools.series.octree import Octree

BEND = 0.25  # amplitude of the front over the width of the channel
BAND = 0.75  # half width of what is finest, in cubes


def front_series(
    n: int = 32,
    *,
    n_levels: int = 3,
    n_frames: int = 60,
    steps: int = 10,
    subcycling: bool = False,
) -> Iterator[Frame]:
    """Yield the frames: meshes with parents.

    n = 32 with 3 levels: 65,760 to 1.8 million cells; n = 41: 138,150 to 3.0 million.
    With `subcycling` a cell of level l weighs 2^l: it takes that many small steps.
    """
    before: Octree | None = None
    for k in range(n_frames):
        tree = front_tree(n, n_levels, time=k / max(1, n_frames - 1))
        parent = None if before is None else tree.parents(before)
        weight = np.exp2(tree.level) if subcycling else None
        yield Frame(tree.to_mesh(), weight=weight, parent=parent, steps=steps)
        before = tree


def front_tree(n: int, n_levels: int, *, time: float) -> Octree:
    """Return the leaves at a time from 0 (before the front) to 1 (after it)."""
    # the finest band, and one cube of each coarser level around it: neighbours differ by one level
    reach = [BAND + sum(0.5**m for m in range(level, n_levels - 1)) for level in range(n_levels)]
    begin = -BEND * n - reach[0] - 1
    place = begin + time * (2 * n - 2 * begin)
    steepest = BEND * np.hypot(2 * np.pi, np.pi)

    def divides(center: np.ndarray, level: int) -> np.ndarray:
        x, y, z = center.T
        bend = np.sin(2 * np.pi * (y / n + 1.5 * time)) * np.cos(np.pi * z / n)
        distance = np.abs(x - place - BEND * n * bend) / np.hypot(1.0, steepest)
        return distance < reach[level]

    return Octree.grow((2 * n, n, n), n_levels, divides)
