"""Steps of smoothing on small graphs whose answer is known by hand."""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_array, csr_array

from sfcpart.methods.graph.coarsen import WeightedGraph
from sfcpart.methods.smoothing.borders import flow_between, touching_pairs
from sfcpart.methods.smoothing.excess import rebalance
from sfcpart.methods.smoothing.pieces import join_pieces
from sfcpart.methods.smoothing.queues import BUCKETS, bucket_of
from sfcpart.methods.smoothing.smooth import smooth_slice
from sfcpart.methods.smoothing.state import State
from sfcpart.methods.smoothing.tidy import tidy_interfaces
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice


def lattice(rows: int, columns: int) -> WeightedSlice:
    number = np.arange(rows * columns).reshape(rows, columns)
    ends = np.concatenate(
        [
            np.stack([number[:-1].ravel(), number[1:].ravel()], 1),
            np.stack([number[:, :-1].ravel(), number[:, 1:].ravel()], 1),
        ]
    )
    n = rows * columns
    both = (ends.T.reshape(-1), ends[:, ::-1].T.reshape(-1))
    matrix = csr_array(coo_array((np.ones(2 * len(ends), np.int64), both), shape=(n, n)))
    return WeightedSlice.of_graph(
        WeightedGraph(
            matrix.indptr.astype(np.int64),
            matrix.indices.astype(np.int32),
            matrix.data.astype(np.int64),
            np.ones(n, np.int64),
        )
    )


def parts(text: str) -> np.ndarray:
    return np.array([int(letter) for letter in text if letter.isdigit()], np.int32)


def test_flows_straighten_a_border():
    state = State.of(
        lattice(4, 6), parts("000111 001111 000111 000111"), np.array([13, 13], np.int64)
    )
    assert flow_between(state, sweeps=2) == 2
    assert state.cost() == 4
    np.testing.assert_array_equal(state.load, np.bincount(state.own))


def test_a_price_keeps_vertices_at_home():
    start, ragged = parts("000111 000111 000111"), parts("000111 001111 000111")
    graph, capacity = lattice(3, 6), np.array([10, 10], np.int64)
    price = np.full(18, 3, np.int64)
    kept = smooth_slice(graph, ragged, capacity, home_part=ragged, home_price=price)
    np.testing.assert_array_equal(kept, ragged)
    np.testing.assert_array_equal(smooth_slice(graph, ragged, capacity), start)
    back = smooth_slice(graph, ragged, capacity, home_part=start, home_price=price)
    np.testing.assert_array_equal(back, start)


def test_excess_is_carried_over_a_part_without_room():
    state = State.of(lattice(2, 9), parts("000000112 000000112"), np.array([8, 4, 10], np.int64))
    rebalance(state)
    assert state.overload == 0
    assert state.load.tolist() == [8, 4, 6]


def test_a_stray_piece_goes_to_the_part_around_it():
    state = State.of(lattice(3, 6), parts("000111 000101 000111"), np.array([10, 10], np.int64))
    join_pieces(state)
    np.testing.assert_array_equal(state.own, parts("000111 000111 000111"))


def test_a_piece_that_fits_nowhere_leaves_others_in_one_piece_and_in_balance():
    state = State.of(lattice(3, 6), parts("000111 000101 000111"), np.array([10, 8], np.int64))
    join_pieces(state)
    assert state.overload == 0
    assert state.load.tolist() == [10, 8]
    assert state.own.reshape(3, 6)[1, 4] == 1


def test_parts_that_hardly_touch_part_at_no_cost():
    # part 0 reaches along the edge between 1 and 2 and touches 3 by its tip alone
    start = parts("111133 000033 222233")
    state = State.of(lattice(3, 6), start, np.full(4, 8, np.int64))
    pairs, length = touching_pairs(state)
    assert len(pairs) == 5
    tidy_interfaces(state)
    assert length.sum() == 11
    assert state.cost() <= 11
    assert len(touching_pairs(state)[0]) <= 5


def test_large_parts_move_in_blocks_too():
    rows, columns = np.divmod(np.arange(64 * 66), 66)
    start = (columns + 4 * np.sin(rows / 3.0) >= 33).astype(np.int32)
    capacity = np.full(2, 2300, np.int64)
    graph = lattice(64, 66)
    part = smooth_slice(graph, start, capacity)
    assert State.of(graph, part, capacity).cost() == 64
    assert np.bincount(part).max() <= 2300


def test_an_empty_part_is_filled_though_it_costs():
    graph, capacity = lattice(3, 6), np.array([18, 18], np.int64)
    part = smooth_slice(graph, np.zeros(18, np.int32), capacity)
    assert np.bincount(part, minlength=2).min() >= 1


def test_buckets_rise_with_loss_per_weight():
    loss = np.array([-3, 0, 1, 2, 3, 50, 1 << 40], np.int64)
    bucket = bucket_of(loss, np.ones(7, np.int64))
    assert bucket[:2].tolist() == [0, 0]
    assert np.all(np.diff(bucket[1:]) > 0)
    assert bucket.max() < BUCKETS
