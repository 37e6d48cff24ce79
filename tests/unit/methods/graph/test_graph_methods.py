"""Partitions of graphs: laws on random weighted graphs, and each stage on its own."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.sparse import coo_array, csr_array

from sfcpart.errors import InputError, WeightError
from sfcpart.methods.graph.any_graph import graph_of_matrix
from sfcpart.methods.graph.balance import join_pieces, rebalance
from sfcpart.methods.graph.coarsen import contract, hierarchy
from sfcpart.methods.graph.labels import Labels, boundary_of, cut_of
from sfcpart.methods.graph.multilevel import split_graph
from sfcpart.methods.graph.refine import flow_between, refine_between, search_locally
from sfcpart.methods.graph.smooth import smooth
from sfcpart.methods.graph.vcycle import Aim, divide, improve


def symmetric(n: int, edges, weights=None) -> csr_array:
    """Build a symmetric matrix from pairs; equal pairs add up, self-loops are left out."""
    pairs = np.array([(a, b) for a, b in edges if a != b], np.int64).reshape(-1, 2)
    value = np.ones(len(pairs), np.int64) if weights is None else np.asarray(weights)[: len(pairs)]
    row = np.concatenate([pairs[:, 0], pairs[:, 1]])
    column = np.concatenate([pairs[:, 1], pairs[:, 0]])
    return csr_array(coo_array((np.tile(value, 2), (row, column)), shape=(n, n)))


def grid(rows: int, columns: int) -> csr_array:
    number = np.arange(rows * columns).reshape(rows, columns)
    edges = np.concatenate(
        [
            np.stack([number[:-1].ravel(), number[1:].ravel()], 1),
            np.stack([number[:, :-1].ravel(), number[:, 1:].ravel()], 1),
        ]
    )
    return symmetric(rows * columns, edges)


def star(n: int) -> csr_array:
    return symmetric(n, [(0, i) for i in range(1, n)])


@st.composite
def graphs(draw):
    """Draw any small weighted graph: disconnected, with isolated, heavy and weightless vertices."""
    n = draw(st.integers(1, 24))
    vertex = st.integers(0, n - 1)
    edges = draw(st.lists(st.tuples(vertex, vertex), max_size=3 * n))
    widths = draw(st.lists(st.integers(1, 9), min_size=len(edges), max_size=len(edges)))
    weight = draw(st.lists(st.sampled_from([0, 1, 1, 2, 50]), min_size=n, max_size=n))
    return symmetric(n, edges, widths), np.array(weight, np.int64)


@settings(max_examples=40, deadline=None)
@given(graphs(), st.integers(1, 9), st.sampled_from([0.0, 0.03, 0.5]), st.integers(0, 3))
def test_any_graph_is_divided_the_same_each_time(drawn, n_parts, tolerance, seed):
    matrix, weight = drawn
    options = {"tolerance": tolerance, "vertex_weight": weight, "seed": seed}
    part = split_graph(matrix, n_parts, **options)
    n = matrix.shape[0]
    assert part.shape == (n,)
    assert part.dtype == np.int32
    assert part.min() >= 0
    assert part.max() < n_parts
    assert len(np.unique(part)) == min(n, n_parts), "a part is empty"
    np.testing.assert_array_equal(part, split_graph(matrix, n_parts, **options))


@settings(max_examples=40, deadline=None)
@given(graphs(), st.integers(1, 9))
def test_perfect_balance_is_kept_with_unit_weights(drawn, n_parts):
    matrix, _ = drawn
    size = np.bincount(split_graph(matrix, n_parts, tolerance=0.0), minlength=n_parts)
    assert size.max() <= -(-matrix.shape[0] // n_parts)


REFINERS = {
    "local search": lambda labels: search_locally(labels, rounds=3, patience=10, seed=1),
    "flows": lambda labels: flow_between(labels, sweeps=3, depth=4, stretch=8.0),
    "pairs": lambda labels: refine_between(labels, sweeps=3, patience=50, slack=2),
}


@pytest.mark.parametrize("name", REFINERS)
@settings(max_examples=30, deadline=None)
@given(drawn=graphs(), n_parts=st.integers(2, 5), room=st.integers(0, 20), data=st.data())
def test_refinement_never_cuts_more_nor_breaks_a_capacity(name, drawn, n_parts, room, data):
    matrix, weight = drawn
    graph = graph_of_matrix(matrix, weight)
    label = st.integers(0, n_parts - 1)
    start = np.array(data.draw(st.lists(label, min_size=graph.n, max_size=graph.n)), np.int32)
    before = np.bincount(start, weights=weight, minlength=n_parts).astype(np.int64)
    labels = Labels(graph, start.copy(), before + room)
    REFINERS[name](labels)
    after = np.bincount(labels.part, weights=weight, minlength=n_parts).astype(np.int64)
    np.testing.assert_array_equal(labels.load, after)
    assert np.all(after <= labels.capacity)
    assert cut_of(graph, labels.part) <= cut_of(graph, start)


@pytest.mark.parametrize(("name", "most"), [("local search", 16), ("flows", 8), ("pairs", 8)])
def test_refinement_straightens_a_ragged_border(name, most):
    graph = graph_of_matrix(grid(8, 12), None)
    column = np.arange(96) % 12
    ragged = (column >= 6 + np.array([1, -1, 1, -1, 1, -1, 1, -1])[np.arange(96) // 12]).astype(
        np.int32
    )
    labels = Labels(graph, ragged, np.array([52, 52]))
    assert cut_of(graph, ragged) == 22
    REFINERS[name](labels)
    assert 8 <= cut_of(graph, labels.part) <= most


def test_flow_finds_the_border_that_single_moves_cannot():
    # Two heavy bars four steps apart: every single step between them costs.
    graph = graph_of_matrix(grid(6, 10), None)
    labels = Labels(graph, (np.arange(60) % 10 >= 7).astype(np.int32), np.array([60, 60]))
    width = graph.edge_weight
    row = np.repeat(np.arange(60), np.diff(graph.indptr))
    column = np.minimum(row % 10, graph.indices % 10)
    across = row // 10 == graph.indices // 10
    width[across] = np.array([9, 9, 9, 9, 1, 9, 9, 5, 9, 9])[column[across]]
    assert cut_of(graph, labels.part) == 54
    flow_between(labels, sweeps=1, depth=5, stretch=4.0)
    assert cut_of(graph, labels.part) == 6


def test_excess_is_carried_over_full_parts_to_room():
    graph = graph_of_matrix(grid(1, 40), None)
    labels = Labels(graph, np.repeat(np.arange(4, dtype=np.int32), [16, 10, 10, 4]), np.full(4, 10))
    rebalance(labels)
    assert labels.load.tolist() == [10, 10, 10, 10]
    assert cut_of(graph, labels.part) == 3


def test_pieces_are_joined_to_the_part_they_touch_most():
    graph = graph_of_matrix(grid(4, 8), None)
    part = (np.arange(32) % 8 >= 4).astype(np.int32)
    part[[0, 31]] = [1, 0]
    labels = Labels(graph, part, np.array([16, 16]))
    join_pieces(labels)
    assert labels.part.tolist() == (np.arange(32) % 8 >= 4).astype(int).tolist()


@settings(max_examples=40, deadline=None)
@given(graphs(), st.integers(0, 5))
def test_coarser_graphs_keep_weights_and_cuts(drawn, seed):
    matrix, weight = drawn
    graph = graph_of_matrix(matrix, weight)
    label = (np.arange(graph.n) % 2).astype(np.int32)
    levels = hierarchy(graph, label, smallest=2, heaviest=60, seed=seed)
    fine_label = label
    for level, next_level in pairwise(levels):
        coarse = next_level.graph
        expected = np.zeros(coarse.n, np.int64)
        np.add.at(expected, level.coarse_of, level.graph.vertex_weight)
        np.testing.assert_array_equal(coarse.vertex_weight, expected)
        coarse_label = np.empty(coarse.n, np.int32)
        coarse_label[level.coarse_of] = fine_label
        np.testing.assert_array_equal(coarse_label[level.coarse_of], fine_label)
        assert cut_of(coarse, coarse_label) == cut_of(level.graph, fine_label)
        fine_label = coarse_label


def test_a_star_shrinks_by_pairs_that_share_their_hub():
    levels = hierarchy(
        graph_of_matrix(star(200), None), np.zeros(200, np.int32), smallest=20, heaviest=50, seed=0
    )
    assert levels[-1].graph.n <= 20


def test_merging_by_hand():
    graph = graph_of_matrix(
        symmetric(4, [(0, 1), (1, 2), (2, 3), (0, 3)], [1, 2, 3, 4]), [1, 2, 3, 4]
    )
    coarse = contract(graph, np.array([0, 0, 1, 1], np.int32), 2)
    assert coarse.vertex_weight.tolist() == [3, 7]
    assert coarse.indices.tolist() == [1, 0]
    assert coarse.edge_weight.tolist() == [6, 6]


@settings(max_examples=20, deadline=None)
@given(graphs(), st.integers(2, 5), st.integers(0, 3))
def test_cycles_and_smoothing_never_end_above_their_start(drawn, n_parts, seed):
    matrix, weight = drawn
    graph = graph_of_matrix(matrix, weight)
    start = (np.arange(graph.n) % n_parts).astype(np.int32)
    load = np.bincount(start, weights=weight, minlength=n_parts).astype(np.int64)
    aim = Aim(np.full(n_parts, weight.sum() / n_parts), load + 3, seed)
    other = divide(graph, aim)
    for part in (
        improve(graph, start, aim),
        improve(graph, start, aim, other=other),
        smooth(graph, start, aim),
    ):
        assert cut_of(graph, part) <= cut_of(graph, start)
        assert np.all(np.bincount(part, weights=weight, minlength=n_parts) <= aim.capacity)


@pytest.mark.parametrize("threads", ["2", "5"])
def test_the_number_of_threads_does_not_show(monkeypatch, threads):
    matrix = grid(14, 14)
    monkeypatch.setenv("SFCPART_THREADS", "1")
    alone = split_graph(matrix, 7, seed=3)
    monkeypatch.setenv("SFCPART_THREADS", threads)
    np.testing.assert_array_equal(split_graph(matrix, 7, seed=3), alone)


def test_the_boundary_is_both_sides_of_the_cut():
    labels = Labels(
        graph_of_matrix(grid(1, 6), None), np.array([0, 0, 0, 1, 1, 1], np.int32), np.full(2, 6)
    )
    assert boundary_of(labels).tolist() == [2, 3]


@pytest.mark.parametrize(
    ("matrix", "options", "error", "words"),
    [
        (np.eye(3), {}, InputError, "sparse matrix"),
        (csr_array((2, 3)), {}, InputError, r"shape \(2, 3\)"),
        (csr_array(np.array([[0, 1], [0, 0]])), {}, InputError, r"not symmetric at \(0, 1\)"),
        (csr_array(np.array([[0, -1], [-1, 0]])), {}, WeightError, "is -1"),
        (csr_array(np.array([[0, np.nan], [np.nan, 0]])), {}, WeightError, "finite"),
        (grid(2, 2), {"vertex_weight": [1, 1, 1]}, WeightError, r"shape \(3,\)"),
        (grid(2, 2), {"vertex_weight": [1, 1, -2, 1]}, WeightError, r"vertex_weight\[2\] is -2"),
        (grid(2, 2), {"vertex_weight": [1, 1, 0.5, 1]}, WeightError, "whole numbers"),
        (grid(2, 2), {"n_parts": 0}, InputError, "n_parts is 0"),
        (grid(2, 2), {"tolerance": -0.1}, InputError, "tolerance is -0.1"),
        (grid(2, 2), {"starts": 0}, InputError, "starts is 0"),
    ],
)
def test_bad_input_is_named(matrix, options, error, words):
    n_parts = options.pop("n_parts", 2) if "n_parts" in options else 2
    with pytest.raises(error, match=words):
        split_graph(matrix, n_parts, **options)


def test_edges_heavier_and_heavier_along_a_path_still_merge():
    n = 600
    path = graph_of_matrix(
        symmetric(n, pairwise(range(n)), (1.1 ** np.arange(n - 1) % 1e6 + 1).astype(int)), None
    )
    rising = graph_of_matrix(symmetric(n, pairwise(range(n)), np.arange(1, n)), None)
    for graph in (path, rising):
        levels = hierarchy(graph, np.zeros(n, np.int32), smallest=50, heaviest=n, seed=0)
        assert levels[-1].graph.n <= 60
        for fine, coarse in pairwise(levels):
            mean = n / fine.graph.n
            assert coarse.graph.n <= 0.75 * fine.graph.n
            assert coarse.graph.vertex_weight.max() <= 5 * mean + 1
