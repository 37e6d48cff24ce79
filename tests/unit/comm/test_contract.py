"""Every communicator that needs no launcher keeps the contract (MPI: `tests/mpi`)."""

from __future__ import annotations

import pytest

from sfcpart.comm import SerialComm, run_ranks
from tests.unit.comm.contract import SCENARIOS


@pytest.mark.parametrize("name", SCENARIOS)
def test_one_rank(name):
    act, expect = SCENARIOS[name]
    assert act(SerialComm()) == expect(0, 1)


@pytest.mark.parametrize("size", [1, 2, 3, 5])
@pytest.mark.parametrize("name", SCENARIOS)
def test_ranks_as_threads(name, size):
    act, expect = SCENARIOS[name]
    assert run_ranks(size, act) == [expect(rank, size) for rank in range(size)]
