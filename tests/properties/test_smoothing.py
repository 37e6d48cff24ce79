"""Smoothing over ranks: the same parts for any number of ranks, never worse than its start."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.sparse import coo_array, csr_array

from sfcpart.comm import run_ranks
from sfcpart.methods.smoothing.blocks import BlockGraph
from sfcpart.methods.smoothing.borders import flow_between
from sfcpart.methods.smoothing.excess import fill_empty_parts, rebalance
from sfcpart.methods.smoothing.moves import move_labels
from sfcpart.methods.smoothing.pieces import join_pieces
from sfcpart.methods.smoothing.smooth import smooth_slice
from sfcpart.methods.smoothing.state import State
from sfcpart.methods.smoothing.tidy import tidy_interfaces
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice


@st.composite
def problems(draw):
    """Draw any small weighted graph with labels, prices and capacities, and stretches of ranks.

    Disconnected, star-shaped, with isolated, heavy and weightless vertices, empty parts, more parts
    than vertices, empty stretches, one rank holding all.
    """
    n = draw(st.integers(1, 40))
    k = draw(st.integers(1, 7))
    seed = draw(st.integers(0, 2**16))
    rng = np.random.default_rng(seed)
    kind = draw(st.sampled_from(["path", "star", "random", "none"]))
    ends = {
        "path": np.stack([np.arange(n - 1), np.arange(1, n)], 1),
        "star": np.stack([np.zeros(n - 1, np.int64), np.arange(1, n)], 1),
        "random": rng.integers(0, n, (3 * n, 2)),
        "none": np.empty((0, 2), np.int64),
    }[kind]
    ends = ends[ends[:, 0] != ends[:, 1]]
    width = rng.integers(1, 9, len(ends))
    both = coo_array(
        (np.tile(width, 2), (ends.T.reshape(-1), ends[:, ::-1].T.reshape(-1))), shape=(n, n)
    )
    matrix = csr_array(both)
    matrix.sum_duplicates()
    weight = rng.choice([0, 1, 1, 1, 2, 30], n).astype(np.int64)
    part = rng.integers(0, k, n).astype(np.int32)
    slack = draw(st.sampled_from([0.0, 0.1, 1.0]))
    capacity = np.full(k, int(np.ceil(weight.sum() / k * (1 + slack))), np.int64)
    priced = draw(st.booleans())
    home = rng.integers(-1, k, n).astype(np.int32) if priced else None
    price = rng.integers(0, 5, n).astype(np.int64) if priced else None
    size = draw(st.sampled_from([2, 3, 4, 7]))
    cuts = draw(st.lists(st.integers(0, n), min_size=size - 1, max_size=size - 1))
    return matrix, weight, part, capacity, home, price, np.array([0, *sorted(cuts), n])


def on_ranks(drawn, work, edges):
    """Run work(comm, slice, part, capacity, home, price) on stretches; return what it gave."""
    matrix, weight, part, capacity, home, price, _ = drawn

    def act(comm):
        lo, hi = edges[comm.rank], edges[comm.rank + 1]
        entries = slice(matrix.indptr[lo], matrix.indptr[hi])
        graph = WeightedSlice.of_rows(
            comm,
            (matrix.indptr[lo : hi + 1] - matrix.indptr[lo]).astype(np.int64),
            matrix.indices[entries].astype(np.int64),
            matrix.data[entries].astype(np.int64),
            weight[lo:hi],
        )
        own = {
            "home_part": None if home is None else home[lo:hi],
            "home_price": None if price is None else price[lo:hi],
        }
        return work(graph, part[lo:hi], capacity, own)

    return run_ranks(len(edges) - 1, act)


def cost_of(drawn, part) -> int:
    matrix, _, _, _, home, price, _ = drawn
    row = np.repeat(part, np.diff(matrix.indptr))
    cut = int(matrix.data[row != part[matrix.indices]].sum()) // 2
    return cut + (0 if home is None else int(price[home != part].sum()))


def overload_of(drawn, part) -> int:
    _, weight, _, capacity, *_ = drawn
    load = np.bincount(part, weights=weight, minlength=len(capacity)).astype(np.int64)
    return int(np.maximum(load - capacity, 0).sum())


@settings(max_examples=20, deadline=None)
@given(problems())
def test_any_ranks_smooth_alike_and_never_to_the_worse(drawn):
    def work(graph, part, capacity, home):
        return smooth_slice(graph, part, capacity, sweeps=2, **home)

    n, start = len(drawn[1]), drawn[2]
    alone = on_ranks(drawn, work, np.array([0, n]))[0]
    many = np.concatenate(on_ranks(drawn, work, drawn[-1]))
    np.testing.assert_array_equal(alone, many)
    assert alone.dtype == np.int32
    ends = [
        (-len(np.unique(part)), overload_of(drawn, part), cost_of(drawn, part))
        for part in (alone, start)
    ]
    assert ends[0] <= ends[1]


STEPS = {
    "label moves": lambda state: move_labels(state, boldness=200),
    "flows": lambda state: flow_between(state, sweeps=2),
    "rebalancing": rebalance,
    "pieces": join_pieces,
    "empty parts": fill_empty_parts,
    "tiny interfaces": tidy_interfaces,
}


@pytest.mark.parametrize("name", STEPS)
@settings(max_examples=12, deadline=None)
@given(drawn=problems())
def test_each_step_is_the_same_on_any_ranks(name, drawn):
    def work(graph, part, capacity, home):
        state = State.of(graph, part, capacity, **home)
        before = state.overload, state.cost()
        STEPS[name](state)
        return state.own.copy(), state.load.copy(), before, (state.overload, state.cost())

    n, k = len(drawn[1]), len(drawn[3])
    part, load, before, after = on_ranks(drawn, work, np.array([0, n]))[0]
    many = on_ranks(drawn, work, drawn[-1])
    np.testing.assert_array_equal(part, np.concatenate([own for own, *_ in many]))
    for _, other, *_ in many:
        np.testing.assert_array_equal(load, other)
    np.testing.assert_array_equal(load, np.bincount(part, weights=drawn[1], minlength=k))
    assert after == (overload_of(drawn, part), cost_of(drawn, part))
    if name in ("label moves", "flows", "tiny interfaces"):
        assert after <= before
    if name in ("rebalancing", "pieces"):
        assert after[0] <= before[0]


@settings(max_examples=12, deadline=None)
@given(drawn=problems(), bits=st.integers(0, 4))
def test_blocks_keep_cost_loads_and_prices(drawn, bits):
    def work(graph, part, capacity, home):
        state = State.of(graph, part, capacity, **home)
        blocks = BlockGraph.of(state, bits)
        coarse = blocks.coarse
        assert coarse.cost() == state.cost()
        np.testing.assert_array_equal(coarse.load, state.load)
        move_labels(coarse)
        blocks.project()
        assert coarse.cost() == state.cost()
        np.testing.assert_array_equal(coarse.load, state.load)
        return state.own.copy(), coarse.graph.vertex_weight

    alone = on_ranks(drawn, work, np.array([0, len(drawn[1])]))[0]
    many = on_ranks(drawn, work, drawn[-1])
    for i in range(2):
        np.testing.assert_array_equal(alone[i], np.concatenate([rows[i] for rows in many]))
