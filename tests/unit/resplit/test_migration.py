"""What moves, the least possible, and the verdict."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import InputError
from sfcpart.measure.step_model import Network
from sfcpart.resplit.migration import Migration, least_moved
from sfcpart.resplit.verdict import Verdict

NETWORK = Network("toy", latency=1.0, bandwidth=10.0)


def moved(home: list[int], new: list[int], **wish) -> Migration:
    n_old, n_new = wish.pop("n_old", 3), wish.pop("n_new", 3)
    return Migration.of(
        np.array(home, np.int32), np.array(new, np.int32), n_old_parts=n_old, n_parts=n_new,
        most=wish.pop("most", np.full(n_new, 2)), network=NETWORK, cell_bytes=20.0, **wish,
    )  # fmt: skip


def test_what_moves_is_told_by_pair_and_by_part():
    found = moved(
        [0, 0, 0, 0, 1, 2], [0, 0, 1, 2, 1, 2], weight=np.array([1, 1, 4, 2, 1, 1]), unit=0.5
    )
    assert found.cells.toarray().tolist() == [[2, 1, 1], [0, 1, 0], [0, 0, 1]]
    assert found.weight.toarray().tolist() == [[1.0, 2.0, 1.0], [0, 0.5, 0], [0, 0, 0.5]]
    assert found.bytes.toarray().tolist() == [[0, 20, 20], [0, 0, 0], [0, 0, 0]]
    assert found.sent_cells.tolist() == [2, 0, 0]
    assert found.received_cells.tolist() == [0, 1, 1]
    assert (found.moved_cells, found.moved_bytes, found.messages) == (2, 40.0, 2)
    assert (found.moved_weight, found.moved_share) == (3.0, 0.6)


def test_seconds_are_those_of_the_busiest_part():
    found = moved([0, 0, 0, 0, 1, 2], [0, 0, 1, 2, 1, 2])
    assert found.part_seconds.tolist() == [6.0, 3.0, 3.0]  # two messages of 1 s + 20 B / (10 B/s)
    assert (found.seconds, found.busiest_part) == (6.0, 0)


def test_the_least_counts_what_no_part_may_keep():
    assert least_moved(np.array([5, 1]), np.array([3, 3])) == 2
    assert least_moved(np.array([5, 1, 4]), np.array([9])) == 5  # parts 1 and 2 are given up
    assert least_moved(np.array([5]), np.array([2, 2, 2])) == 3


def test_a_split_heavier_than_asked_is_measured_by_what_it_holds():
    found = moved([0, 0, 0, 1], [0, 0, 0, 1], most=np.array([2, 2]), n_old=2, n_new=2)
    assert (found.least_weight, found.times_least, found.moved_share) == (0.0, None, 0.0)
    assert found.busiest_part == -1


def test_all_figures_are_plain_and_stable():
    plain = moved([0, 1, 1], [0, 0, 1], n_old=2, n_new=2).to_json_dict()
    assert plain["pairs"] == {"from": [1], "to": [0], "cells": [1], "weight": [1.0]}
    assert plain["busiest_cells"] == 1 and plain["busiest_bytes"] == 20.0


def test_weightless_cells_move_no_share():
    assert moved([0, 1, 1], [0, 0, 1], weight=np.zeros(3, np.int64)).moved_share == 0.0


@pytest.mark.parametrize("wrong", [-1.0, float("nan")])
def test_bytes_of_a_cell_are_a_number(wrong):
    with pytest.raises(InputError, match="cell_bytes is"):
        Migration.of(
            np.zeros(1, np.int32), np.zeros(1, np.int32), n_old_parts=1, n_parts=1,
            most=np.ones(1), cell_bytes=wrong,
        )  # fmt: skip


def verdict(before, after, **wish) -> Verdict:
    given = {"split_seconds": 1.0, "move_seconds": 1.0, "steps": 10} | wish
    return Verdict.of(before, after, **given)


@pytest.mark.parametrize(
    ("before", "after", "steps", "pays", "text"),
    [
        (2.0, 1.0, 10, True, "re-split now: pays back after 2 steps"),
        (4.0, 1.0, 10, True, "re-split now: pays back after 1 step"),
        (2.0, 1.0, 2, False, "keep the old split: a new one pays back after 2 steps, but only 2"),
        (1.0, 1.0, 10, False, "keep the old split: steps would not be faster"),
        (1.0, 2.0, 10, False, "keep the old split: steps would not be faster"),
        (None, 2.0, 10, True, "re-split now: the old split cannot be kept"),
        (1.0, None, 10, None, "unknown: without faces"),
        (None, None, 10, None, "unknown: without faces"),
    ],
)
def test_the_verdict_says_in_a_line_whether_it_pays(before, after, steps, pays, text):
    found = verdict(before, after, steps=steps)
    assert found.pays is pays
    assert found.text.startswith(text)
    assert found.to_json_dict()["verdict"] == found.text


def test_a_split_for_nothing_pays_from_the_first_step():
    assert verdict(2.0, 1.0, split_seconds=0.0, move_seconds=0.0).break_even == 1


@pytest.mark.parametrize(
    ("wrong", "text"),
    [
        ({"split_seconds": -1.0}, "split_seconds is -1"),
        ({"move_seconds": float("inf")}, "move_seconds is inf"),
        ({"steps": 0}, "steps is 0"),
        ({"steps": 1.5}, "steps is 1.5"),
    ],
)
def test_times_and_steps_are_checked(wrong, text):
    with pytest.raises(InputError, match=text):
        verdict(2.0, 1.0, **wrong)
