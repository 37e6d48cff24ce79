"""Law: the same answer for any number of ranks and threads, bit for bit."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.curve import curve_keys, curve_order
from sfcpart.methods.registry import METHODS
from sfcpart.partition import Partition
from tests.assertions import assert_partition
from tests.laws import PROBLEMS, problem_of

ALONE = [name for name, method in METHODS.items() if not method.needs_graph]


@pytest.mark.parametrize("method", ALONE)
@pytest.mark.parametrize("name", PROBLEMS)
def test_any_number_of_ranks(name, method):
    run = METHODS[method].run
    problem = problem_of(name, SerialComm())
    alone = run(problem)
    assert_partition(
        Partition.from_array(alone, problem.n_parts),
        len(problem.centers),
        problem.n_parts,
        weights=problem.weight,
        groups=problem.group,
    )
    for size in (1, 2, 3, 5):
        pieces = run_ranks(size, lambda comm: run(problem_of(name, comm)))
        np.testing.assert_array_equal(np.concatenate(pieces), alone)


@pytest.mark.parametrize("name", PROBLEMS)
def test_keys_and_order_on_any_number_of_ranks(name):
    centers = problem_of(name, SerialComm()).centers
    for size in (1, 2, 3, 5):
        keys = run_ranks(size, lambda comm: curve_keys(problem_of(name, comm).centers, comm=comm))
        order = run_ranks(size, lambda comm: curve_order(problem_of(name, comm).centers, comm=comm))
        np.testing.assert_array_equal(np.concatenate(keys), curve_keys(centers))
        np.testing.assert_array_equal(np.concatenate(order), curve_order(centers))


@pytest.mark.large
@pytest.mark.parametrize("method", ALONE)
@pytest.mark.parametrize("name", ["cloud", "lattice", "nearly_alike_2d", "groups"])
def test_any_number_of_threads(name, method, monkeypatch):
    # Large enough for several ranges of rows (sfcpart.kernels.threads).
    problem = problem_of(name, SerialComm(), n_cells=150_000)
    answers = []
    for n_threads in ("1", "2", "3", "7"):
        monkeypatch.setenv("SFCPART_THREADS", n_threads)
        answers.append(METHODS[method].run(problem))
    for answer in answers[1:]:
        np.testing.assert_array_equal(answer, answers[0])
