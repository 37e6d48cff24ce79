"""Rows on their way between ranks."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.comm import run_ranks
from sfcpart.slices.routing import ask_rows, block_bounds, compact, dealing, owner_of


@pytest.mark.parametrize("size", [1, 2, 3, 7])
def test_rows_come_by_rank_in_their_order_and_go_back(size: int) -> None:
    draw = np.random.default_rng(1).integers(0, size, (size, 20))

    def deal(comm):
        way = dealing(comm, draw[comm.rank])
        rows = np.arange(20) + 100 * comm.rank
        came = way.forward(rows)
        assert way.back(came).tolist() == rows.tolist()
        return came.tolist()

    for rank, came in enumerate(run_ranks(size, deal)):
        wanted = [100 * r + k for r in range(size) for k in range(20) if draw[r, k] == rank]
        assert came == wanted


@pytest.mark.parametrize("size", [1, 2, 7])
def test_rows_are_asked_for_by_number(size: int) -> None:
    first = block_bounds(5, size)
    table = np.arange(10.0).reshape(5, 2)

    def ask(comm):
        mine = table[first[comm.rank] : first[comm.rank + 1]]
        gid = np.array([4, 0, 4])[: comm.rank + 1]
        got = ask_rows(comm, mine, first=first, gid=gid)
        np.testing.assert_array_equal(got, table[gid])

    run_ranks(size, ask)


def test_empty_blocks_own_nothing() -> None:
    assert block_bounds(1, 3).tolist() == [0, 0, 0, 1]
    assert owner_of(np.array([0]), block_bounds(1, 3)).tolist() == [2]


@pytest.mark.parametrize("ids", [[], [3], [5, 2, 5, 9], [0, 10**12, 7], [2**40 + 1, 2**40]])
def test_compact_is_numpys_unique(ids: list[int]) -> None:
    array = np.array(ids, np.int64)
    gid, number = compact(array)
    wanted, inverse = np.unique(array, return_inverse=True)
    assert gid.tolist() == wanted.tolist()
    assert number.tolist() == inverse.tolist()
    assert number.dtype == np.int32
