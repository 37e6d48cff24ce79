"""The same split on 1 to 4 MPI ranks, one of them without cells, as in this process."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.api import split
from sfcpart.comm import SerialComm
from sfcpart.curve import curve_order
from sfcpart.methods.registry import METHODS
from tests.laws import PROBLEMS, problem_of
from tests.mpi.harness import run_job
from tests.mpi.split_job import METHODS_OF
from tests.strategies import grid

PAIRS = [(name, m) for name in PROBLEMS for m in METHODS_OF.get(name, ["hilbert"])]


@pytest.fixture(scope="module", params=[1, 2, 3, 4])
def seen(request, tmp_path_factory):
    """Run the job once for each number of ranks."""
    folder = tmp_path_factory.mktemp(f"ranks{request.param}")
    run_job("tests.mpi.split_job", request.param, folder)
    with np.load(folder / "seen.npz") as arrays:
        return dict(arrays)


@pytest.mark.parametrize("name", PROBLEMS)
def test_the_order_does_not_depend_on_the_ranks(seen, name):
    centers = problem_of(name, SerialComm()).centers
    np.testing.assert_array_equal(seen[f"{name} order"], curve_order(centers))


def test_smoothed_parts_do_not_depend_on_the_ranks(seen):
    mesh = grid((4, 4, 4), simplices=True)
    alone = split(mesh, 5, method="smoothed").cell_part
    np.testing.assert_array_equal(seen["smoothed"], alone)


@pytest.mark.parametrize(("name", "method"), PAIRS)
def test_the_parts_do_not_depend_on_the_ranks(seen, name, method):
    wanted = METHODS[method].run(problem_of(name, SerialComm()))
    assert wanted.dtype == seen[f"{name} {method}"].dtype == np.int32
    np.testing.assert_array_equal(seen[f"{name} {method}"], wanted)
