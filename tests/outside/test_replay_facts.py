"""When to re-split: published examples."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.resplit.hindsight import best_period, follow
from sfcpart.resplit.policies import StopAtRise
from tests.oracles.runs import aging_table


def first_rise(cost: float, growth: float) -> int:
    rule = StopAtRise(cost)
    step = 1
    while not rule.after_step(growth * step, 0.0):
        step += 1
    return step


def test_stop_at_rise_on_the_published_example():
    # D. M. Nicol, J. H. Saltz, IEEE Trans. Comput. 37:1073 (1988), formula from memory: with loss
    # m j the rule stops at the smallest n with n(n-1) > 2C/m; C = 10, m = 0.2 gives 11.
    assert first_rise(10.0, 0.2) == 11


@pytest.mark.parametrize("cost", [0.5, 3.0, 7.0, 100.0])
@pytest.mark.parametrize("growth", [0.1, 0.7, 2.0])
def test_stop_at_rise_stops_where_the_formula_says(cost, growth):
    n = np.arange(1, 200)
    assert first_rise(cost, growth) == n[n * (n - 1) > 2 * cost / growth][0]


@pytest.mark.parametrize(("cost", "growth", "period"), [(10.0, 0.2, 10), (8.0, 1.0, 4)])
def test_the_best_fixed_period_under_steady_growth(cost, growth, period):
    # H. Menon, N. Jain, G. Zheng, L. Kale, CLUSTER (2012), from memory: sqrt(2C/m), the same
    # example gives 10. The loss grows from 0 at the re-split; the run is a multiple of the period.
    n = 20 * period
    table = aging_table(n, growth * np.arange(n), cost)
    assert best_period(table)[0] == period


def test_stop_at_rise_on_a_whole_run_keeps_its_pace():
    table = aging_table(100, 0.2 * np.arange(1, 101), 10.0)
    assert np.diff([0, *follow(table, StopAtRise).resplits]).tolist() == [11] * 9
