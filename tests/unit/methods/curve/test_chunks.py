"""Chunks of a line against dynamic programming, on any number of ranks."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import PartitionError
from sfcpart.methods.curve.chunks import cut_line
from sfcpart.methods.curve.line import Line
from tests.oracles.chunks import bottleneck_of, least_bottleneck

SPEEDS = [0.3, 0.5, 1.0, 2.0, 7.7]


def cut(comm, weight, speed, *, limit_weight=None, limit=None, least=1, part=slice(None)):
    """Cut a whole line, of which this rank holds `part`."""
    line = Line.of(
        len(np.arange(1000)[part]) if weight is None else len(weight[part]),
        weight=None if weight is None else weight[part],
        limit_weight=None if limit_weight is None else limit_weight[part],
        reach=least + 1,
        comm=comm,
    )
    return cut_line(line, begin=0, end=line.n_items, speed=speed, limit=limit, least=least)


@st.composite
def tasks(draw):
    """Draw a line, speeds, perhaps limits, and the least number of items."""
    n = draw(st.integers(1, 14))
    n_parts = draw(st.integers(1, 5))
    most = draw(st.sampled_from([1, 3, 10, 10**6]))
    weight = np.array(draw(st.lists(st.integers(0, most), min_size=n, max_size=n)), np.int64)
    if draw(st.booleans()):
        weight[draw(st.integers(0, n - 1))] *= 20
    speed = np.ones(n_parts) * draw(st.sampled_from(SPEEDS))
    if draw(st.booleans()):
        speed = np.array([draw(st.sampled_from(SPEEDS)) for _ in range(n_parts)])
    given_limits = {}
    if draw(st.booleans()):
        memory = np.array(draw(st.lists(st.integers(0, 5), min_size=n, max_size=n)), np.int64)
        most = int(memory.sum()) + 1
        limit = np.array([draw(st.integers(0, most)) for _ in range(n_parts)], np.int64)
        given_limits = {"limit_weight": memory, "limit": limit}
    return weight, speed, given_limits, draw(st.integers(0, 3))


def assert_best(cuts, weight, speed, limits, least):
    """Assert that cuts are those of a division with least bottleneck."""
    assert cuts[0] == 0
    assert cuts[-1] == len(weight)
    assert (np.diff(cuts) >= least).all()
    assert bottleneck_of(cuts, weight, speed) == least_bottleneck(
        weight, speed, **limits, least=least
    )
    if limits:
        held = np.add.reduceat(np.append(limits["limit_weight"], 0), cuts[:-1])
        held[np.diff(cuts) == 0] = 0
        assert (held <= limits["limit"]).all()


@given(tasks())
def test_least_bottleneck(task):
    weight, speed, limits, least = task
    try:
        cuts = cut(SerialComm(), weight, speed, **limits, least=least)
    except PartitionError:
        assert least_bottleneck(weight, speed, **limits, least=least) == np.inf
    else:
        assert_best(cuts, weight, speed, limits, least)


@pytest.mark.parametrize("size", [2, 3, 4, 7])
@given(task=tasks(), seed=st.integers(0, 99))
def test_same_cuts_on_any_number_of_ranks(size, task, seed):
    weight, speed, limits, least = task
    edge = np.sort(np.random.default_rng(seed).integers(0, len(weight) + 1, size - 1))
    edge = np.concatenate(([0], edge, [len(weight)]))

    def work(comm):
        part = slice(edge[comm.rank], edge[comm.rank + 1])
        return cut(comm, weight, speed, **limits, least=least, part=part)

    try:
        alone = cut(SerialComm(), weight, speed, **limits, least=least)
    except PartitionError as refused:
        with pytest.raises(PartitionError) as caught:
            run_ranks(size, work)
        assert str(caught.value) == str(refused)
    else:
        for cuts in run_ranks(size, work):
            np.testing.assert_array_equal(cuts, alone)


@pytest.mark.parametrize("scale", [1.0, 0.7, 3.3e-9])
def test_equal_items_are_shared_evenly(scale):
    # 10 items in 4 parts: the least bottleneck is 3; cuts lie nearest to 2.5, 5, 7.5
    cuts = cut(SerialComm(), None, np.full(4, scale), part=slice(0, 10))
    assert cuts.tolist() == [0, 2, 5, 8, 10]


@pytest.mark.parametrize("size", [1, 3])
@pytest.mark.parametrize(
    ("weight", "n_parts", "cuts"),
    [
        ([1] * 30 + [50], 4, [0, 10, 20, 30, 31]),
        ([50] + [1] * 30, 4, [0, 1, 11, 21, 31]),
        ([1] * 10 + [50] + [1] * 20, 4, [0, 10, 11, 21, 31]),
        ([1] * 10 + [50, 900] + [1] * 20, 5, [0, 10, 11, 12, 22, 32]),
        ([1] * 12, 4, [0, 3, 6, 9, 12]),
    ],
)
def test_loads_beside_heavy_items_are_even(size, weight, n_parts, cuts):
    # The bottleneck is the heavy item's: among all divisions that keep it, the light items are
    # shared evenly and not packed to the left.
    weight = np.array(weight, np.int64)
    edge = np.arange(size + 1) * len(weight) // size

    def work(comm):
        part = slice(edge[comm.rank], edge[comm.rank + 1])
        return cut(comm, weight, np.ones(n_parts), part=part)

    assert [found.tolist() for found in run_ranks(size, work)] == [cuts] * size


def test_slow_part_before_a_heavy_item_takes_a_light_one():
    # The furthest reach of part 0 leaves only an item too heavy for part 1: one cut less far is
    # right, which a probe that always reaches furthest does not see.
    weight, speed = np.array([5, 1, 9], np.int64), np.array([10.0, 1.0, 10.0])
    cuts = cut(SerialComm(), weight, speed)
    assert cuts.tolist() == [0, 1, 2, 3]
    assert bottleneck_of(cuts, weight, speed) == 1.0


def test_bottleneck_is_exact_in_floats():
    # speeds of thirds and tenths: quotients round, the least rounded one must be found
    rng = np.random.default_rng(0)
    for _ in range(20):
        weight = rng.integers(0, 2**40, 12)
        speed = rng.choice([1 / 3, 0.1, 0.7], 4)
        assert_best(cut(SerialComm(), weight, speed), weight, speed, {}, 1)


def test_huge_sums():
    weight = np.full(8, 2**59, np.int64)
    cuts = cut(SerialComm(), weight, np.ones(4))
    assert cuts.tolist() == [0, 2, 4, 6, 8]


def test_weightless_items_are_shared_by_number():
    assert cut(SerialComm(), np.zeros(9, np.int64), np.ones(3)).tolist() == [0, 3, 6, 9]


def test_impossible_limits_say_what_would_do():
    with pytest.raises(PartitionError, match="limits 1.5 times as large would do") as caught:
        cut(
            SerialComm(),
            np.ones(9, np.int64),
            np.ones(3),
            limit_weight=np.ones(9, np.int64),
            limit=np.full(3, 2),
        )
    assert "need 9 in all, the 3 parts may hold 6" in str(caught.value)


def test_too_few_items():
    with pytest.raises(PartitionError, match="5 items cannot give 3 parts 2 each"):
        cut(SerialComm(), np.ones(5, np.int64), np.ones(3), least=2)


@pytest.mark.large
def test_many_parts_of_a_long_line():
    rng = np.random.default_rng(1)
    weight = rng.integers(1, 1000, 200_000)
    cuts = cut(SerialComm(), weight, np.ones(3000))
    best = bottleneck_of(cuts, weight.tolist(), [1.0] * 3000)
    assert best >= weight.sum() / 3000
    # greedily filling parts up to one less than the best needs more parts than there are
    used, load = 1, 0
    for w in weight.tolist():
        if load + w > best - 1:
            used, load = used + 1, 0
        load += w
    assert used > 3000
