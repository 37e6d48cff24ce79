"""Rules that say when to re-split, step by step."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import InputError
from sfcpart.resplit.hindsight import best_period, follow, hindsight
from sfcpart.resplit.policies import Every, Forecast, Never, Regret, StopAtRise, Threshold
from tests.oracles.runs import aging_table


def first_resplit(rule, losses) -> int | None:
    """Return the step, from 1, at which a rule first re-splits."""
    for step, loss in enumerate(losses, 1):
        if rule.after_step(1.0 + loss, 1.0):
            return step
    return None


def test_simple_rules_do_what_they_are_called():
    assert first_resplit(Never(), [9.0] * 50) is None
    assert first_resplit(Threshold(0.5), [0.1, 0.5, 0.6]) == 3
    rule = Every(3)
    assert first_resplit(rule, [0.0] * 9) == 3
    rule.after_resplit(1.0)
    assert first_resplit(rule, [0.0] * 9) == 3


@pytest.mark.parametrize("make", [lambda: Every(0), lambda: Threshold(-0.1)])
def test_numbers_out_of_range_are_refused(make):
    with pytest.raises(InputError, match="wanted"):
        make()


@pytest.mark.parametrize("cost", [0.3, 3.0, 40.0])
@pytest.mark.parametrize("growth", [0.05, 0.2, 1.0])
def test_under_steady_growth_the_clock_finds_the_best_period(cost, growth):
    # The mean cost of a step, C/n + growth (n + 1)/2, is least near n = sqrt(2 C/growth).
    n = np.arange(1, 200)
    best = float((cost / n + growth * (n + 1) / 2).min())
    table = aging_table(400, growth * np.arange(1, 401), cost)
    path = follow(table, Regret)
    often = growth > cost  # then it tries now and then how it would fare without
    assert path.seconds / 400 - 1 <= (1.06 if often else 1.02) * best + cost / 400


def test_the_clock_re_splits_after_a_jump_that_stays():
    losses = [0.0] * 10 + [0.5] * 200
    step = first_resplit(Regret(cost=10.0), losses)
    assert step is not None
    assert 10 + 10 / 0.5 - 1 <= step <= 10 + 10 / 0.5 + 3  # what it lost has reached the cost
    assert first_resplit(StopAtRise(cost=10.0), [0.0] * 10 + [0.5] * 200) is None


def test_one_late_step_is_not_believed_but_two_are():
    quiet = [0.10, 0.11, 0.10, 0.12, 0.11, 0.10]
    assert first_resplit(Regret(cost=5.0), [*quiet, 9.0, *quiet]) is None
    assert first_resplit(Regret(cost=5.0), [*quiet, 9.0, 9.0]) == 8


def test_a_jump_far_beyond_the_cost_is_believed_at_once():
    assert first_resplit(Regret(cost=0.1), [0.1, 0.1, 0.1, 9.0]) == 4


def test_a_re_split_that_earns_nothing_is_repeated_ever_later():
    rule, gaps = Regret(cost=2.0), []
    for _ in range(5):
        # whatever is done, the loss jumps up three steps later and stays
        gaps.append(first_resplit(rule, [0.0] * 3 + [0.5] * 500))
        rule.after_resplit(2.0)
    assert gaps[2:] == sorted(gaps[2:])
    assert gaps[-1] > 3 * gaps[0]


def test_near_the_end_of_the_run_nothing_is_re_split_in_vain():
    losses = 0.2 * np.arange(1, 13)
    assert first_resplit(Regret(cost=10.0), losses) == 10
    assert first_resplit(Regret(cost=10.0, steps_left=12), losses) is None
    assert first_resplit(Regret(cost=10.0, steps_left=40), losses) == 10
    assert first_resplit(Regret(cost=0.0, steps_left=1), [1.0]) is None


def test_where_every_step_spoils_the_split_every_step_is_re_split():
    # The second step after a split loses more than a re-split costs: the best period is 1.
    table = aging_table(100, 2.0 * np.arange(100), cost=1.0)
    assert best_period(table)[0] == 1
    path = follow(table, Regret)
    assert path.seconds <= 1.08 * hindsight(table).seconds


def test_noise_does_not_make_the_clock_nervous():
    rng = np.random.default_rng(0)
    loss = 0.05 + 0.01 * np.abs(rng.standard_normal(500))
    rule, count = Regret(cost=3.0), 0
    for one in loss:
        if rule.after_step(1.0 + one, 1.0):
            rule.after_resplit(3.0)
            count += 1
    assert count <= 3  # nothing can be gained: 500 steps lose 4 s beyond the least of them


def test_costs_are_learned():
    rule = Regret(cost=100.0)
    rule.after_step(2.0, 1.0)
    rule.after_resplit(4.0)
    assert rule.cost == 4.0
    rule.after_resplit(8.0)
    assert rule.cost == 6.0


def test_a_forecast_follows_a_line_exactly():
    forecast = Forecast()
    for step in range(1, 10):
        forecast.add(3.0 * step, grave=1e9)
        if step > 1:
            assert forecast.next == pytest.approx(3.0 * (step + 1))


def test_a_forecast_remembers_how_a_fresh_split_ages():
    forecast = Forecast()
    for rise in (5.0, 3.0, 100.0):  # the last one is a late step
        forecast.add(1.0, grave=1e9)
        forecast.add(1.0 + rise, grave=1e9)
        forecast = forecast.anew()
    forecast.add(1.0, grave=1e9)
    assert forecast.next == pytest.approx(6.0)
    for _ in range(50):  # re-split after every step: nothing more is seen of it
        forecast = forecast.anew()
        forecast.add(1.0, grave=1e9)
    assert 1.0 < forecast.next < 5.0
