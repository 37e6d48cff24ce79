"""The frozen result: what it accepts, renames and compares."""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.errors import PartitionError
from sfcpart.partition import Partition
from tests.assertions import assert_partition


def frozen(values) -> np.ndarray:
    """Make the array a method would return."""
    array = np.array(values, np.int32)
    array.flags.writeable = False
    return array


@pytest.mark.parametrize(
    "array",
    [[0, 2, 1], np.array([0, 2, 1], np.uint8), np.array([0.0, 2.0, 1.0]), (0, 2, 1)],
    ids=["list", "small integers", "whole floats", "tuple"],
)
def test_whole_numbers_of_any_type_are_taken(array):
    partition = Partition.from_array(array)
    assert_partition(partition, 3, 3)
    assert partition.cell_part.tolist() == [0, 2, 1]
    assert partition.n_cells == 3


def test_the_caller_s_array_stays_the_caller_s():
    mine = np.array([0, 1, 1], np.int32)
    partition = Partition.from_array(mine)
    mine[0] = 1
    assert partition.cell_part.tolist() == [0, 1, 1]
    assert mine.flags.writeable


def test_a_frozen_array_is_not_copied():
    array = frozen([0, 1, 1])
    assert Partition.from_array(array).cell_part is array


def test_parts_may_be_empty_if_asked_for():
    partition = Partition.from_array([0, 3], 6)
    assert partition.part_size().tolist() == [1, 0, 0, 1, 0, 0]


@pytest.mark.parametrize(
    ("array", "n_parts", "message"),
    [
        ([[0, 1]], None, r"shape \(1, 2\)"),
        ([0, -1, 1], None, "cell 1 is in part -1; parts go from 0 to 1"),
        ([0, 5, 1], 3, "cell 1 is in part 5; parts go from 0 to 2"),
        ([], None, "n_parts is 0; wanted at least 1"),
        ([0], 0, "n_parts is 0"),
        ([0, 0.5], None, "cell 1 is in part 0.5; wanted whole numbers"),
        ([0.0, 1e300], None, "cell 1 is in part 1e\\+300; wanted whole numbers"),
        ([0, 10**9, 3], None, "cell 1 of 3 is in part 1000000000; number the parts from 0"),
        ([0.0, np.nan], None, "whole numbers"),
        ([0.0, np.inf], None, "whole numbers"),
        (["0"], None, "whole numbers"),
        ([0], 2**31, "at most 2147483647"),
    ],
)
def test_what_is_no_partition_is_refused(array, n_parts, message):
    with pytest.raises(PartitionError, match=message):
        Partition.from_array(array, n_parts)


def test_it_cannot_be_changed():
    partition = Partition.from_array([0, 1])
    with pytest.raises(AttributeError):
        partition.n_parts = 3
    with pytest.raises(ValueError, match="read-only"):
        partition.cell_part[0] = 1


parts = st.lists(st.integers(0, 4), min_size=1, max_size=30)


@given(parts, st.permutations(range(5)))
def test_renaming_there_and_back_changes_nothing(values, label):
    partition = Partition.from_array(values, 5)
    renamed = partition.relabel(label)
    assert [label[part] for part in values] == renamed.cell_part.tolist()
    assert renamed.relabel(np.argsort(label)).equals(partition)


@pytest.mark.parametrize("label", [[0, 0, 1], [0, 1], [0, 1, 3], [[0, 1, 2]]])
def test_renaming_wants_a_permutation(label):
    with pytest.raises(PartitionError, match=r"no permutation of 0\.\.2"):
        Partition.from_array([0, 1, 2]).relabel(label)


def test_equality_is_cell_by_cell_and_in_the_number_of_parts():
    one = Partition.from_array([0, 1])
    assert one.equals(Partition.from_array(np.array([0, 1], np.int64)))
    assert not one.equals(Partition.from_array([0, 1], 3))
    assert not one.equals(Partition.from_array([1, 0]))
    assert not one.equals(Partition.from_array([0, 1, 1]))


@given(st.lists(st.tuples(st.integers(0, 3), st.integers(0, 2), st.integers(0, 99)), min_size=1))
def test_overlap_counts_shared_weight(cells):
    mine, theirs, weight = (np.array(column) for column in zip(*cells, strict=True))
    one, other = Partition.from_array(mine, 4), Partition.from_array(theirs, 3)
    shared = np.zeros((4, 3), np.int64)
    for p, q, w in cells:
        shared[p, q] += w
    np.testing.assert_array_equal(one.overlap(other, weight).toarray(), shared)
    counts = one.overlap(other).toarray()
    np.testing.assert_array_equal(counts.sum(axis=1), one.part_size())
    np.testing.assert_array_equal(counts.sum(axis=0), other.part_size())


def test_overlap_wants_the_same_cells():
    with pytest.raises(PartitionError, match="2 and 3 cells"):
        Partition.from_array([0, 1]).overlap(Partition.from_array([0, 1, 0]))


@given(
    st.lists(st.tuples(st.integers(0, 3), st.integers(0, 3), st.integers(0, 9)), min_size=1),
)
def test_comparing_counts_what_moved_and_what_no_renaming_saves(cells):
    mine, theirs, weight = (np.array(column) for column in zip(*cells, strict=True))
    change = Partition.from_array(mine, 4).compare(Partition.from_array(theirs, 4), weight)
    moved = [cell for cell, (p, q, _) in enumerate(cells) if p != q]
    assert (change.n_moved, change.first_moved) == (len(moved), moved[0] if moved else -1)
    assert change.moved_share == (weight[moved].sum() / weight.sum() if weight.any() else 0)
    tried = (np.sum(mine != np.array(names)[theirs]) for names in permutations(range(4)))
    assert change.n_moved_relabelled == min(tried)


def test_comparing_partitions_with_other_numbers_of_parts():
    one, other = Partition.from_array([0, 0, 1, 1, 2]), Partition.from_array([3, 3, 3, 0, 0], 9)
    assert one.compare(other).n_moved_relabelled == 2
    assert other.compare(one).n_moved_relabelled == 2
    with pytest.raises(PartitionError, match="5 and 4 cells"):
        one.compare(Partition.from_array([0, 0, 1, 1]))
