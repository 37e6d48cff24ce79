"""The decision for a running solver, on one rank and on several."""

from __future__ import annotations

import numpy as np
import pytest

import sfcpart
from sfcpart.comm import run_ranks
from sfcpart.errors import InputError


def growing(rank: int, age: int) -> float:
    """Return seconds: rank 2 gets slower with the age of the split."""
    return 1.0 + (0.1 * age if rank == 2 else 0.0) + 0.001 * rank


@pytest.mark.parametrize("size", [1, 2, 4])
def test_all_ranks_get_the_same_answers(size):
    def solve(comm):
        clock, age, answers = sfcpart.RebalanceClock(comm, cost=2.0), 0, []
        for _ in range(40):
            age += 1
            answers.append(clock.after_step(growing(comm.rank, age)))
            if answers[-1]:
                clock.after_resplit(1.0 + 0.1 * comm.rank)
                age = 0
        return answers, clock.cost, clock.n_resplits, clock.reason, clock.imbalance

    found = run_ranks(size, solve)
    assert all(one == found[0] for one in found)
    answers, cost, count, reason, imbalance = found[0]
    assert count == sum(answers)
    assert (count > 2) == (size == 4)
    assert 1.0 <= cost < 2.5
    assert "lost since the last re-split" in reason
    assert imbalance >= 0


def test_the_rank_for_which_a_re_split_takes_longest_counts():
    def solve(comm):
        clock = sfcpart.RebalanceClock(comm, cost=9.0)
        clock.after_resplit(1.0 + comm.rank)
        return clock.cost

    assert run_ranks(3, solve) == [3.0] * 3


def test_a_re_split_is_taken_to_cost_more_when_there_is_more_work():
    clock = sfcpart.RebalanceClock(cost=2.0)
    costs = []
    for mean in (1.0, 1.5, 100.0, 1.0, 0.01):
        clock.after_reduced_step(slowest=mean, mean=mean)
        costs.append(clock.cost)
    assert costs == pytest.approx([2.0, 3.0, 8.0, 2.0, 0.5])
    clock.after_resplit(4.0)
    clock.after_reduced_step(slowest=0.02, mean=0.02)
    assert clock.cost == pytest.approx(8.0)


def test_reduced_times_give_the_same_answers_as_single_ones():
    own, reduced = sfcpart.RebalanceClock(cost=2.0), sfcpart.RebalanceClock(cost=2.0)
    for _ in range(5):
        assert own.after_step(1.5) == reduced.after_reduced_step(slowest=1.5, mean=1.5)
    assert own.imbalance == pytest.approx(reduced.imbalance, abs=1e-9)


def test_steps_without_work_are_taken():
    clock = sfcpart.RebalanceClock(cost=2.0)
    assert not clock.after_step(0.0)
    assert clock.imbalance == 0.0


@pytest.mark.parametrize("wrong", [-1.0, float("nan"), float("inf"), "soon", None])
def test_wrong_times_of_one_rank_are_refused_on_all(wrong):
    def solve(comm):
        clock = sfcpart.RebalanceClock(comm, cost=2.0)
        seen = []
        for call in (clock.after_step, clock.after_resplit):
            with pytest.raises(InputError, match="wanted") as caught:
                call(wrong if comm.rank == 1 else 1.0)
            seen.append(str(caught.value))
        assert not clock.after_step(1.0)
        return seen

    first, second = run_ranks(2, solve)
    assert first == second
    assert "the time of a step" in first[0]
    assert "the cost of a re-split" in first[1]


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (lambda: sfcpart.RebalanceClock(cost=-1.0), "cost is -1.0 s"),
        (lambda: sfcpart.RebalanceClock(cost=np.nan), "cost is nan s"),
        (lambda: sfcpart.RebalanceClock(cost=1.0, n_steps=0), "n_steps is 0"),
        (lambda: sfcpart.RebalanceClock("world", cost=1.0), "wanted a communicator"),
        (
            lambda: sfcpart.RebalanceClock(cost=1.0).after_reduced_step(slowest=1.0, mean=2.0),
            "swapped",
        ),
    ],
)
def test_what_makes_no_clock_is_refused(make, words):
    with pytest.raises(InputError, match=words):
        make()


def test_the_end_of_the_run_counts():
    def resplits(n_steps):
        clock = sfcpart.RebalanceClock(cost=10.0, n_steps=n_steps)
        return [clock.after_reduced_step(slowest=1 + 0.2 * n, mean=1.0) for n in range(1, 13)]

    assert any(resplits(None))
    assert not any(resplits(12))
