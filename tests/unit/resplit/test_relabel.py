"""Names of new parts against all permutations."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp
from scipy.sparse import csr_array

from sfcpart.comm import run_ranks
from sfcpart.resplit import overlap as overlaps
from sfcpart.resplit.overlap import Overlap
from sfcpart.resplit.relabel import best_labels, match_most
from sfcpart.resplit.scratch import scratch
from tests.unit.resplit.lines import line_task


def overlap_of(table: np.ndarray) -> Overlap:
    """Return the overlap with these weights: one cell a pair."""
    old, new = np.nonzero(table)
    ones = np.ones(len(old), np.int64)
    pairs = old.astype(np.int32), new.astype(np.int32)
    return Overlap(*table.shape, *pairs, ones, table[old, new])


def kept(table: np.ndarray, label: np.ndarray) -> int:
    """Return the weight that stays at home."""
    square = np.zeros((max(table.shape),) * 2, np.int64)
    square[: table.shape[0], : table.shape[1]] = table
    return int(square[label, np.arange(table.shape[1])].sum())


def worst(table: np.ndarray, label: np.ndarray) -> int:
    """Return what the part that moves most sends or receives, named parts only."""
    n = table.shape[1]
    square = np.zeros((max(table.shape),) * 2, np.int64)
    square[: table.shape[0], :n] = table
    stays = square[label, np.arange(n)]
    return int(np.maximum(square.sum(axis=1)[label], table.sum(axis=0)).__sub__(stays).max())


TABLES = hnp.arrays(
    np.int64, st.tuples(st.integers(1, 5), st.integers(1, 5)), elements=st.integers(0, 9)
)


@settings(max_examples=60)
@given(TABLES, st.integers(0, 60))
def test_no_other_names_keep_more_at_home(table, shift):
    table = table << shift % 40
    label = best_labels(overlap_of(table))
    best = max(kept(table, np.array(p)) for p in permutations(range(table.shape[1])))
    assert sorted(label.tolist()) == list(range(table.shape[1]))
    assert kept(table, label) == best


@settings(max_examples=60)
@given(TABLES)
def test_no_other_names_let_the_busiest_part_move_less(table):
    label = best_labels(overlap_of(table), keep="busiest")
    best = min(worst(table, np.array(p)) for p in permutations(range(table.shape[1])))
    assert sorted(label.tolist()) == list(range(table.shape[1]))
    assert worst(table, label) == best


@pytest.mark.parametrize("keep", ["total", "busiest"])
def test_parts_trade_names_within_their_kind_only(keep):
    table = np.array([[0, 9, 0, 0], [0, 0, 9, 0], [0, 0, 0, 9], [9, 0, 0, 0]])
    kind = np.array([0, 0, 1, 1])
    label = best_labels(overlap_of(table), keep=keep, kind=kind)
    assert np.array_equal(kind[label], kind)
    assert label[1] == 0 and label[3] == 2


def nested_best(table: np.ndarray, a: int, b: int) -> int:
    """Return the most that names keep which leave blocks of b parts together, by brute force."""
    best = -1
    for outer in permutations(range(a)):
        total = 0
        for block, name in enumerate(outer):
            part = table[name * b : (name + 1) * b, block * b : (block + 1) * b]
            total += max(kept(part, np.array(p)) for p in permutations(range(b)))
        best = max(best, total)
    return best


@settings(max_examples=25)
@given(hnp.arrays(np.int64, (6, 6), elements=st.integers(0, 5)), st.sampled_from([(2, 3), (3, 2)]))
def test_parts_of_a_node_stay_together(table, sizes):
    label = best_labels(overlap_of(table), level_sizes=sizes)
    node = label // sizes[1]
    assert all(len(set(block)) == 1 for block in node.reshape(sizes).tolist())
    assert kept(table, label) == nested_best(table, *sizes)
    busiest = best_labels(overlap_of(table), level_sizes=sizes, keep="busiest")
    assert sorted(busiest.tolist()) == list(range(6))


def test_nodes_of_different_speeds_keep_their_names():
    table = np.zeros((4, 4), np.int64)
    table[:2, 2:] = table[2:, :2] = 5  # every part would rather be on the other node
    label = best_labels(overlap_of(table), level_sizes=(2, 2), kind=np.array([0, 0, 1, 1]))
    assert sorted(label[:2].tolist()) == [0, 1]


def test_nothing_shared_leaves_names_as_they_are():
    assert match_most(csr_array((2, 3), dtype=np.int64)).tolist() == [-1, -1, -1]
    assert best_labels(overlap_of(np.zeros((2, 3), np.int64))).tolist() == [0, 1, 2]


@pytest.mark.parametrize("bits", [10, 1])
def test_overlaps_do_not_depend_on_the_ranks(bits, monkeypatch):
    monkeypatch.setattr(overlaps, "_BITS", bits)
    rng = np.random.default_rng(0)
    home, new = rng.integers(0, 7, 50), rng.integers(0, 30, 50)
    weight = rng.integers(0, 100, 50)

    def act(comm, edges, weighed):
        own = slice(edges[comm.rank], edges[comm.rank + 1])
        return Overlap.of(
            home[own].astype(np.int32), new[own].astype(np.int32), n_old_parts=7, n_parts=30,
            weight=weight[own] if weighed else None, comm=comm,
        )  # fmt: skip

    for weighed in (True, False):
        one = run_ranks(1, lambda comm, w=weighed: act(comm, [0, 50], w))[0]
        for many in run_ranks(3, lambda comm, w=weighed: act(comm, [0, 20, 20, 50], w)):
            assert np.array_equal(one.cells, many.cells)
            assert np.array_equal(one.weight, many.weight)
        dense = np.zeros((7, 30), np.int64)
        np.add.at(dense, (home, new), weight if weighed else 1)
        assert np.array_equal(one.matrix(one.weight).toarray(), dense)
        name = rng.permutation(30).astype(np.int32)
        renamed = one.renamed(name)
        assert np.array_equal(renamed.matrix(renamed.weight).toarray()[:, name], dense)


def test_a_split_from_scratch_takes_the_names_of_the_old_one():
    home = np.repeat([3, 1, 0, 2], 5)
    assert scratch(line_task(home, n_parts=4)).tolist() == home.tolist()
