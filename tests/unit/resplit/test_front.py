"""The aim for the clock, on small fronts: near hindsight, and as good as the best period."""

from __future__ import annotations

import pytest

import sfcpart
from tools.series.front import front_series

RULES = ("never", "stop-at-rise", "clock", "best-period", "hindsight")


@pytest.mark.large
@pytest.mark.parametrize(("size", "n_parts"), [(4, 8), (5, 16)])
def test_over_the_front_the_clock_is_as_good_as_the_best_period(size, n_parts):
    series = front_series(size, n_levels=2, n_frames=13 * size, steps=1)
    found = sfcpart.replay(series, n_parts, rules=RULES)
    row = {figures["rule"]: figures for figures in found.figures()}
    assert row["clock"]["regret"] < 0.1
    assert row["clock"]["seconds"] <= 1.02 * row["best-period"]["seconds"]
    assert row["clock"]["seconds"] < row["stop-at-rise"]["seconds"] < row["never"]["seconds"]
    assert row["hindsight"]["seconds"] == min(figures["seconds"] for figures in row.values())
