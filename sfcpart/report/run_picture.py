"""Imbalance over a run under several rules, with their re-splits, as PNG."""

from __future__ import annotations

from collections.abc import Sequence
from os import PathLike
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.errors import FileError, InputError
from sfcpart.report.colours import PALETTE

__all__ = ["DrawnRun", "draw_run"]

DPI = 100
LANE = 62  # pixels of a rule
HEAD, FOOT = 56, 64


class DrawnRun(NamedTuple):
    """A run to draw: the rule, imbalance of each frame, re-splits, seconds, regret."""

    rule: str
    imbalance: FloatArray
    resplits: tuple[int, ...]
    seconds: float
    regret: float


def draw_run(
    path: str | PathLike[str],
    runs: Sequence[DrawnRun],
    *,
    steps: Int64Array,
    title: str,
    width: int = 1200,
) -> None:
    """Draw a lane for each rule: imbalance (log scale, alike in all), a tick at each re-split.

    Parameters
    ----------
    path : path
        The file, replaced if it exists.
    runs : sequence of DrawnRun
    steps : (n_frames,) int64
        Steps each frame lasts: the axis of time.
    title : str
    width : int
        Pixels.

    Raises
    ------
    InputError
        If there is no run.
    FileError
        If the file cannot be written.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    if not runs:
        raise InputError("there is no run to draw; wanted at least one")
    height = HEAD + LANE * len(runs) + FOOT
    figure = Figure(figsize=(width / DPI, height / DPI), dpi=DPI, facecolor="white")
    FigureCanvasAgg(figure)
    shown = title.encode("utf-8", "replace").decode()
    figure.text(0.015, 1 - 22 / height, shown, fontsize=12, weight="bold", parse_math=False)
    edges = np.concatenate([[0], np.cumsum(steps)])
    most = max(0.1, *(float(run.imbalance.max()) for run in runs))
    for k, run in enumerate(runs):
        low = (FOOT + LANE * (len(runs) - 1 - k) + 6) / height
        axes = figure.add_axes((0.2, low, 0.78, (LANE - 12) / height))
        _lane(axes, run, edges, most, PALETTE[k % len(PALETTE)])
        axes.tick_params(labelbottom=k == len(runs) - 1)
        place = low + (LANE - 12) / 2 / height
        words = f"{run.seconds:.4g} s, regret {run.regret:.1%}, {len(run.resplits)} re-splits"
        figure.text(0.015, place + 8 / height, run.rule, fontsize=9, parse_math=False)
        figure.text(0.015, place - 10 / height, words, fontsize=7, color="0.35")
    note = "Imbalance of work (log scale) over steps; a tick marks a re-split. Times are predicted."
    figure.text(0.015, 12 / height, note, fontsize=8, color="0.35")
    try:
        figure.savefig(path, format="png", dpi=DPI, metadata={"Software": "sfcpart"})
    except OSError as error:
        raise FileError(f"{Path(path)}: cannot be written: {error.strerror or error}") from error


def _lane(ax: Any, run: DrawnRun, edges: Int64Array, most: float, colour: str) -> None:
    """Draw one rule."""
    share = np.maximum(run.imbalance, 1e-3)
    ax.stairs(share, edges, baseline=1e-3, fill=True, color=colour, alpha=0.6)
    if run.resplits:
        at = edges[list(run.resplits)]
        ax.vlines(at, 1e-3, 2e-3, color="black", linewidth=0.8)
    ax.set_yscale("log")
    ax.set_ylim(1e-3, 1.5 * most)
    ax.set_xlim(edges[0], edges[-1])
    ax.set_yticks([0.01, 0.1, 1.0], ["1 %", "10 %", "100 %"], fontsize=6)
    ax.minorticks_off()
