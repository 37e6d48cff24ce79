"""Where cells of a mesh that changed come from."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import InputError, PartitionError
from sfcpart.partition import Partition
from sfcpart.resplit.origin import home_parts

OLD = Partition.from_array([0, 0, 1, 2])


def test_an_unchanged_mesh_is_at_home_where_it_was():
    assert home_parts(OLD, 4).tolist() == [0, 0, 1, 2]


def test_children_are_at_home_with_their_parent():
    assert home_parts(OLD, 5, parent=[3, 2, 0, 3, 1]).tolist() == [2, 1, 0, 2, 0]
    assert home_parts(OLD, 2, parent=np.array([3.0, 0.0])).tolist() == [2, 0]


def test_merged_cells_are_at_home_where_most_of_their_pieces_are():
    assert home_parts(OLD, 2, merged_into=[0, 0, 0, 1]).tolist() == [0, 2]
    assert home_parts(OLD, 2, merged_into=[1, 1, 1, 0], parent=[3, 3]).tolist() == [2, 0]
    assert home_parts(OLD, 1, merged_into=[-1, 0, -1, 0]).tolist() == [0]  # the lowest of equals


def test_other_cells_come_from_the_nearest_old_one():
    old, new = np.array([[0.0], [1.0], [2.0], [3.0]]), np.array([[2.9], [0.1], [1.8]])
    assert home_parts(OLD, 3, old_centers=old, centers=new).tolist() == [2, 0, 1]
    known = home_parts(OLD, 3, parent=[-1, 3, -1], old_centers=old, centers=new)
    assert known.tolist() == [2, 2, 1]


@pytest.mark.parametrize(
    ("wish", "error", "text"),
    [
        ({}, PartitionError, "the old partition has 4 cells, the mesh 3; give the parent"),
        (
            {"parent": [0, 4, 0]},
            InputError,
            "the parent of cell 1 is 4; wanted numbers from 0",
        ),
        ({"parent": [0, -2, 0]}, InputError, "the parent of cell 1 is -2"),
        ({"parent": [0, 1.5, 0]}, InputError, "the parent of cell 1 is 1.5"),
        ({"parent": [0, np.nan, 0]}, InputError, "the parent of cell 1 is nan"),
        ({"parent": [0, 1]}, InputError, r"the parent of cells has shape \(2,\)"),
        ({"parent": ["a", "b", "c"]}, InputError, "the parent of cells is of type"),
        ({"merged_into": [0, 0, 3, 0]}, InputError, "what became of old cell 2 is 3"),
        ({"parent": [0, -1, 0]}, InputError, "nothing tells which old cell became cell 1"),
        (
            {"old_centers": np.zeros((3, 1)), "centers": np.zeros((3, 1))},
            PartitionError,
            "the old partition has 4 cells, the old mesh 3",
        ),
        (
            {"old_centers": np.zeros((4, 2)), "centers": np.zeros((3, 1))},
            InputError,
            "the old mesh has 2 coordinates, the new one 1",
        ),
    ],
)
def test_numbers_that_tell_nothing_are_refused_in_one_line(wish, error, text):
    with pytest.raises(error, match=text):
        home_parts(OLD, 3, **wish)
