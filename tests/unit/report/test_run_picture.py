"""Imbalance over a run, drawn."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.image import imread

from sfcpart.errors import FileError, InputError
from sfcpart.report.run_picture import DrawnRun, draw_run

RUNS = [
    DrawnRun("never", np.array([0.0, 0.5, 2.0]), (), 3.5, 0.7),
    DrawnRun("every:1", np.zeros(3), (1, 2), 2.0, 0.0),
]


def test_a_lane_for_each_rule(tmp_path):
    heights = []
    for count in (1, 2):
        draw_run(tmp_path / "a.png", RUNS[:count], steps=np.array([1, 2, 3]), title="$run")
        heights.append(imread(tmp_path / "a.png").shape[0])
    assert heights[1] - heights[0] == 62
    image = imread(tmp_path / "a.png")[..., :3]
    assert ((image - 1.0) != 0).any(axis=2).mean() > 0.02


def test_what_cannot_be_drawn_is_refused(tmp_path):
    with pytest.raises(InputError, match="no run to draw"):
        draw_run(tmp_path / "a.png", [], steps=np.ones(1, np.int64), title="")
    with pytest.raises(FileError, match="cannot be written"):
        draw_run(tmp_path / "no" / "a.png", RUNS, steps=np.array([1, 2, 3]), title="")
