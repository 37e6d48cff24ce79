"""Burning spots move over one mesh: cells in them are many times as dear; or one rank is slow."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from sfcpart.files.series.frame import Frame
from sfcpart.mesh.refined import refined_box

N_SPOTS = 3
HOT = 20.0  # times the work of a cold cell


def spot_series(n: int = 40, *, n_frames: int = 60, steps: int = 10) -> Iterator[Frame]:
    """Yield one mesh (a box refined at its floor, 2.75 n^3 cells) with weights that move.

    Spots circle at different speeds; the last one flares up after a third of the run and dies.
    """
    mesh = refined_box(n, n_levels=2).to_mesh()
    for k in range(n_frames):
        yield Frame(mesh, weight=heat(mesh.centers / n, k / n_frames), steps=steps)


def heat(place: np.ndarray, time: float) -> np.ndarray:
    """Return the work of cells at places in the unit box, 1 for cold ones."""
    work = np.ones(len(place))
    for spot in range(N_SPOTS):
        turn = 2 * np.pi * (time * (spot + 1) / 2 + spot / N_SPOTS)
        middle = [0.5 + 0.3 * np.cos(turn), 0.5 + 0.3 * np.sin(turn), 0.2 + 0.1 * spot]
        burns = 1.0 if spot < N_SPOTS - 1 else float(1 / 3 <= time < 2 / 3)
        squared = ((place - middle) ** 2).sum(axis=1)
        work += burns * HOT * np.exp(-squared / 0.15**2)
    return work


def slow_series(
    n: int = 40, *, n_parts: int = 64, n_frames: int = 60, steps: int = 10
) -> Iterator[Frame]:
    """Yield one mesh of equal work; rank 5 runs at half speed in the middle half of the run."""
    mesh = refined_box(n, n_levels=2).to_mesh()
    for k in range(n_frames):
        speed = np.ones(n_parts)
        if n_frames // 4 <= k < 3 * n_frames // 4:
            speed[min(5, n_parts - 1)] = 0.5
        yield Frame(mesh, steps=steps, speed=speed)
