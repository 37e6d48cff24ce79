"""MPI ranks keep the same contract as the other communicators, on 1 to 4 ranks."""

from __future__ import annotations

import json

import pytest

from tests.mpi.harness import run_job
from tests.unit.comm.contract import SCENARIOS

SIZES = [1, 2, 3, 4]


@pytest.fixture(scope="module", params=SIZES)
def seen(request, tmp_path_factory):
    """Run the job once for each number of ranks; what each rank saw, in rank order."""
    folder = tmp_path_factory.mktemp(f"ranks{request.param}")
    run_job("tests.mpi.contract_job", request.param, folder)
    return [json.loads((folder / f"rank{r}.json").read_text()) for r in range(request.param)]


def test_a_launcher_is_noticed(seen):
    assert [rank["communicator"] for rank in seen] == ["MpiComm"] * len(seen)
    assert all(rank["same world"] for rank in seen)


@pytest.mark.parametrize("name", SCENARIOS)
def test_scenario(seen, name):
    expect = SCENARIOS[name][1]
    assert [rank[name] for rank in seen] == [expect(r, len(seen)) for r in range(len(seen))]
