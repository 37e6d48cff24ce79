"""Whatever the run: no rule is better than hindsight, and figures belong together."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.resplit.hindsight import follow, hindsight, path_of
from sfcpart.resplit.policies import Regret
from sfcpart.resplit.replayed import replay_rules
from tests.oracles.runs import drawn_table, seconds_of

RULES = ("never", "every:1", "every:3", "threshold:0.2", "stop-at-rise", "clock", "best-period")


@given(st.integers(0, 10**6), st.integers(1, 30))
def test_hindsight_is_never_worse_than_any_rule(seed, n_frames):
    table = drawn_table(np.random.default_rng(seed), n_frames)
    best = hindsight(table).seconds
    for outcome in replay_rules(table, RULES).outcomes:
        path = outcome.path
        assert path.seconds >= best * (1 - 1e-12)
        assert path.seconds == pytest.approx(seconds_of(table, path.resplits), rel=1e-12)
        assert outcome.regret == pytest.approx(path.seconds / best - 1, abs=1e-12)


@given(st.integers(0, 10**6), st.integers(2, 20), st.data())
def test_no_set_of_frames_is_better_than_hindsight(seed, n_frames, data):
    table = drawn_table(np.random.default_rng(seed), n_frames)
    frames = data.draw(st.sets(st.integers(1, n_frames - 1)))
    assert path_of(table, sorted(frames)).seconds >= hindsight(table).seconds * (1 - 1e-12)


@given(st.integers(0, 10**6), st.floats(1e-3, 1e3))
def test_the_clock_does_not_care_for_the_unit_of_time(seed, unit):
    rng = np.random.default_rng(seed)
    losses, cost = np.cumsum(rng.uniform(0, 0.3, 40)), float(rng.uniform(0.5, 5))

    def answers(scale: float) -> list[bool]:
        rule, age, found = Regret(cost * scale), 0, []
        for _ in range(60):
            found.append(rule.after_step(scale * (1 + losses[min(age, 39)]), scale))
            age += 1
            if found[-1]:
                rule.after_resplit(cost * scale)
                age = 0
        return found

    power = 2.0 ** round(np.log2(unit))  # so that rounding is alike
    assert answers(power) == answers(1.0)


@given(st.integers(0, 10**6), st.integers(2, 30))
def test_a_rule_cannot_look_ahead(seed, n_frames):
    # What a rule does up to a frame does not depend on what comes after it.
    rng = np.random.default_rng(seed)
    table = drawn_table(rng, n_frames)
    cut = int(rng.integers(1, n_frames))
    other = np.where(np.arange(n_frames) >= cut, 5.0 * table.slowest, table.slowest)
    first = [k for k in follow(table, Regret).resplits if k <= cut]
    assert first == [k for k in follow(table, Regret, seen=other).resplits if k <= cut]
