"""Rules on a table of a run, and the best there is."""

from __future__ import annotations

import json

import numpy as np
import pytest

from sfcpart.errors import InputError
from sfcpart.resplit.hindsight import best_period, follow, hindsight, path_of
from sfcpart.resplit.policies import Every, Never, StopAtRise
from sfcpart.resplit.replayed import DEFAULT_RULES, replay_rules
from tests.oracles.runs import aging_table, drawn_table, least_seconds, seconds_of


@pytest.mark.parametrize("seed", range(25))
def test_hindsight_is_the_best_of_all_sets_of_frames(seed):
    rng = np.random.default_rng(seed)
    table = drawn_table(rng, int(rng.integers(1, 9)))
    best = hindsight(table)
    assert best.seconds == pytest.approx(least_seconds(table), rel=1e-12)
    assert best.seconds == pytest.approx(seconds_of(table, best.resplits), rel=1e-12)


def test_a_path_adds_up_what_it_passes():
    table = drawn_table(np.random.default_rng(1), 7)
    path = path_of(table, [2, 5])
    assert path.split.tolist() == [0, 0, 2, 2, 2, 5, 5]
    assert path.seconds == pytest.approx(seconds_of(table, (2, 5)))
    assert path.resplit_seconds == pytest.approx(table.cost[0, 2] + table.cost[2, 5])
    assert path.moved_bytes == pytest.approx(100 * path.resplit_seconds)


def test_rules_see_only_the_past():
    table = drawn_table(np.random.default_rng(2), 12)
    assert follow(table, lambda _: Never()).resplits == ()
    assert follow(table, lambda _: Every(5)).resplits == (5, 10)
    assert follow(table, StopAtRise, seen=table.mean).resplits == ()


def test_the_best_period_is_the_best_of_all():
    table = drawn_table(np.random.default_rng(3), 10)
    period, path = best_period(table)
    assert path.seconds == min(follow(table, lambda _, p=p: Every(p)).seconds for p in range(1, 11))
    assert path.resplits == tuple(range(period, 10, period))
    still = aging_table(6, np.zeros(6), cost=1.0)
    assert best_period(still)[0] == 6


def test_one_frame_has_nothing_to_decide():
    found = replay_rules(drawn_table(np.random.default_rng(4), 1))
    assert all(row["n_resplits"] == 0 and row["regret"] == 0 for row in found.figures())


def test_a_replay_lists_every_rule_and_is_strict_json():
    found = replay_rules(drawn_table(np.random.default_rng(5), 9))
    told = json.loads(json.dumps(found.to_json_dict(), allow_nan=False))
    assert [row["rule"] for row in told["rules"]] == list(DEFAULT_RULES)
    assert all(len(row["imbalance"]) == 9 for row in told["rules"])
    assert told["rules"][-1]["regret"] == 0
    assert min(row["seconds"] for row in told["rules"]) == told["rules"][-1]["seconds"]
    assert [row["period"] is None for row in told["rules"]].count(False) == 1


def test_a_run_that_takes_no_time_has_no_regret():
    table = aging_table(3, np.full(3, -1.0), cost=0.0)
    assert replay_rules(table, ["never"]).outcomes[0].regret == 0


@pytest.mark.parametrize(
    ("rules", "words"),
    [
        ([], "no rule to replay"),
        (["sometimes"], "unknown rule 'sometimes'; known: never, every:N"),
        (["never", "never"], "named twice"),
        (["every:often"], "wanted a whole number of frames after the colon"),
        (["every"], "wanted a whole number of frames"),
        (["every:0"], "a period of 0 steps; wanted 1 or more"),
        (["threshold:x"], "wanted a share such as 0.1"),
        (["threshold:-1"], "a threshold of -1.0; wanted"),
        (["threshold:nan"], "a threshold of nan"),
    ],
)
def test_rules_that_are_none_are_refused(rules, words):
    with pytest.raises(InputError, match=words):
        replay_rules(drawn_table(np.random.default_rng(0), 3), rules)
