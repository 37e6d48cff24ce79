"""Ranks as threads: whatever one rank does wrong, nobody waits for ever."""

from __future__ import annotations

import threading
import time

import numpy as np
import pytest

from sfcpart.comm import run_ranks
from sfcpart.errors import InputError, MeshError, RankError

SOON = 20.0  # seconds; far more than any of these takes


def test_results_come_in_rank_order():
    assert run_ranks(5, lambda comm: comm.rank * 10) == [0, 10, 20, 30, 40]


def test_no_ranks_are_refused():
    with pytest.raises(InputError, match="0 ranks; wanted at least 1"):
        run_ranks(0, lambda comm: None)


@pytest.mark.parametrize("size", [1, 2, 5])
def test_an_error_of_one_rank_reaches_the_caller(size):
    def fail(comm):
        comm.barrier()
        if comm.rank == size - 1:
            raise MeshError("cell 3 has no points")
        comm.allreduce(np.zeros(1, int))

    with pytest.raises(MeshError, match="cell 3 has no points"):
        run_ranks(size, fail, timeout=SOON)


def test_of_several_errors_the_lowest_rank_s_is_raised():
    def fail(comm):
        comm.barrier()
        if comm.rank > 0:
            raise ValueError(f"rank {comm.rank}")

    for _ in range(20):
        with pytest.raises(ValueError, match="rank 1"):
            run_ranks(4, fail, timeout=SOON)


@pytest.mark.parametrize("size", [2, 3])
def test_different_collectives_are_told_apart(size):
    def differ(comm):
        if comm.rank == 1:
            return comm.allgather(np.zeros(1))
        return comm.exscan(np.zeros(1, int))

    with pytest.raises(RankError, match=r"rank 0 called exscan\(.*\), rank 1 allgather\("):
        run_ranks(size, differ, timeout=SOON)


@pytest.mark.parametrize(
    ("one", "other"),
    [
        (lambda comm: comm.bcast_object(1, 0), lambda comm: comm.bcast_object(1, 1)),
        (
            lambda comm: comm.allreduce(np.zeros(1, int), "min"),
            lambda comm: comm.allreduce(np.zeros(1, int), "max"),
        ),
        (
            lambda comm: comm.allreduce(np.zeros(1, int)),
            lambda comm: comm.allreduce(np.zeros(2, int)),
        ),
        (
            lambda comm: comm.allreduce(np.zeros(1, np.int32), "max"),
            lambda comm: comm.allreduce(np.zeros(1, np.int64), "max"),
        ),
    ],
    ids=["root", "operation", "shape", "dtype"],
)
def test_collectives_that_differ_in_detail_are_told_apart(one, other):
    with pytest.raises(RankError, match="collectives do not match"):
        run_ranks(2, lambda comm: (one if comm.rank == 0 else other)(comm), timeout=SOON)


def test_a_rank_that_returns_early_is_missed():
    def leave(comm):
        if comm.rank != 2:
            comm.barrier()

    with pytest.raises(RankError, match=r"rank 0 called barrier\(\), rank 2 return\(\)"):
        run_ranks(3, leave, timeout=SOON)


def test_a_stuck_rank_is_named():
    stop = threading.Event()

    def hang(comm):
        if comm.rank == 1:
            stop.wait(SOON)
        comm.barrier()

    with pytest.raises(RankError, match="rank 1 did not end within 0.2 s"):
        run_ranks(3, hang, timeout=0.2)
    stop.set()


def test_a_slow_rank_is_not_waited_for_for_ever():
    def dawdle(comm):
        if comm.rank == 1:
            time.sleep(0.4)

    with pytest.raises(RankError, match=r"rank 0 waited for the others in vain: .* 0\.1 s"):
        run_ranks(2, dawdle, timeout=0.1)


def test_a_root_that_broadcasts_nothing_is_told():
    with pytest.raises(InputError, match="rank 1 broadcasts None; wanted an array on the root"):
        run_ranks(2, lambda comm: comm.bcast(None, 1), timeout=SOON)


def test_arrays_for_the_ranks_must_be_alike():
    def differ(comm):
        comm.alltoall([np.zeros(1), np.zeros(1, np.float32)])

    with pytest.raises(
        InputError, match="the array for rank 1 holds <f4 .* and that for rank 0 <f8"
    ):
        run_ranks(2, differ, timeout=SOON)


def test_a_mismatch_can_be_survived_together():
    def recover(comm):
        try:
            comm.barrier() if comm.rank else comm.exscan(np.zeros(1, int))
        except RankError:
            return int(comm.allreduce(np.ones(1, int))[0])

    assert run_ranks(3, recover, timeout=SOON) == [3, 3, 3]


def test_ranks_do_not_share_memory():
    def scribble(comm):
        mine = np.full(2, comm.rank)
        seen = comm.allgather(mine)
        mine[:] = -1
        comm.barrier()
        return [array.tolist() for array in seen]

    assert run_ranks(3, scribble) == [[[0, 0], [1, 1], [2, 2]]] * 3
