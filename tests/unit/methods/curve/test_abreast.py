"""Tasks abreast get the answers they would get alone, in the rounds of the longest."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.comm import run_ranks
from sfcpart.errors import PartitionError
from sfcpart.methods.curve.abreast import Ask, answered
from tools.ranks.counted import Counted


def task(comm, k: int):
    """Ask for everything, as often as the number of the task says."""
    seen = []
    for turn in range(1 + k % 3):
        mine = np.arange(k % 2 + 1) + 10 * comm.rank + turn
        seen.append((yield Ask("sum", mine)).tolist())
        seen.append((yield Ask("max", mine.reshape(1, -1))).tolist())
        rows = np.full((comm.rank % 2 + k % 2, 2), comm.rank)
        seen.append([piece.tolist() for piece in (yield Ask("gather", rows))])
        for towards in ("first", "last"):
            step = lambda came: np.append(came, comm.rank + k)  # noqa: E731
            seen.append((yield Ask(towards, mine[:0], step)).tolist())
    return seen


@pytest.mark.parametrize("size", [1, 2, 5])
def test_answers_are_those_of_tasks_alone(size):
    def act(comm):
        counted = Counted(comm)
        together = answered(counted, [task(comm, k) for k in range(7)])
        alone = [answered(comm, [task(comm, k)])[0] for k in range(7)]
        return together == alone, counted.rounds["allreduce"], len(together[5])

    assert run_ranks(size, act) == [(True, 6, 15)] * size  # three turns of a sum and a maximum


def test_all_tasks_end_before_the_error_of_the_first_is_raised():
    def failing(k):
        yield Ask("sum", np.array([k]))
        raise PartitionError(f"task {k}")

    def act(comm):
        ended = []

        def long():
            for _ in range(3):
                yield Ask("sum", np.array([1]))
            ended.append(comm.rank)

        with pytest.raises(PartitionError, match="task 1"):
            answered(comm, [long(), failing(1), failing(2)])
        return ended

    assert run_ranks(2, act) == [[0], [1]]


def test_no_tasks_no_rounds():
    assert run_ranks(2, lambda comm: answered(comm, [])) == [[], []]
