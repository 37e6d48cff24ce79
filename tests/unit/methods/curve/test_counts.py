"""Rounds and bytes of selecting cut positions: few, whatever the ranks (`tools/ranks`)."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.comm import run_ranks
from sfcpart.curve import curve_slice
from sfcpart.methods.curve.along_curve import along_hilbert
from sfcpart.methods.curve.chunks import cut_line
from sfcpart.methods.curve.line import Line
from sfcpart.methods.problem import Problem
from tools.ranks.counted import Counted

N_LOCAL = 40


def counts(size: int, n_parts: int, heaviest: int) -> tuple[int, int, int, int]:
    """Return the most rounds and bytes of any rank, in the sort and in the search of cuts."""

    def act(comm):
        rng = np.random.default_rng(comm.rank)
        sort, search = Counted(comm), Counted(comm)
        place = curve_slice(rng.random((N_LOCAL, 2)), comm=sort)
        weight = place.gather(rng.integers(1, heaviest, N_LOCAL))
        line = Line.of(len(place), weight=weight, limit_weight=None, reach=2, comm=search)
        cut_line(line, begin=0, end=line.n_items, speed=np.ones(n_parts))
        beside_rows = sort.bytes.total() - sort.bytes["rows"]
        return sort.rounds.total(), beside_rows, search.rounds.total(), search.bytes.total()

    return tuple(int(n) for n in np.max(run_ranks(size, act, timeout=300.0), axis=0))


@pytest.mark.parametrize("heaviest", [2, 1000, 1 << 40])
@pytest.mark.parametrize("size", [2, 8, 32])
def test_rounds_are_fewer_than_64(size, heaviest):
    sort, _, search, _ = counts(size, size, heaviest)
    assert sort + search < 64 if size > 2 else sort + search < 200  # few ranks: few tries a walk


def test_bytes_follow_ranks_and_parts_not_their_product():
    # at 1e5 ranks and parts these are 66 MB, to which 16 MB of keys come for 1e6 cells a rank
    for size, n_parts in ((8, 8), (32, 8), (32, 32)):
        _, sort, _, search = counts(size, n_parts, 1000)
        assert sort < 12_000 + 380 * size
        assert search < 20_000 + 100 * size + 200 * n_parts + 3_200 * n_parts / N_LOCAL


def test_chunks_of_a_level_are_divided_abreast():
    def act(comm, level_sizes):
        counted = Counted(comm)
        along_hilbert(
            Problem(
                centers=np.random.default_rng(comm.rank).random((N_LOCAL, 2)),
                n_parts=64,
                part_speed=np.ones(64),
                comm=counted,
                graph=lambda: None,
                first_gid=N_LOCAL * comm.rank,
                level_sizes=level_sizes,
            )
        )
        return counted.rounds.total()

    flat = max(run_ranks(8, lambda comm: act(comm, (64,))))
    nested = max(run_ranks(8, lambda comm: act(comm, (8, 8))))
    assert flat < nested < 2.5 * flat  # two levels, not nine ranges
