"""What does not belong together is refused in one line that names the offender."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import InputError, PartitionError, WeightError
from sfcpart.measure import assess_partition
from sfcpart.partition import Partition
from tests.oracles.lattices import box, lattice_graph, lattice_mesh

MESH = lattice_mesh(box(4, 1))
GRAPH = lattice_graph(box(4, 1))
HALVES = Partition.from_array([0, 0, 1, 1])


def test_partition_of_another_mesh():
    with pytest.raises(PartitionError, match="partition has 2 cells, the mesh 4"):
        assess_partition(MESH, GRAPH, Partition.from_array([0, 1]))


def test_graph_of_another_mesh():
    with pytest.raises(InputError, match="cell graph has 5 cells, the mesh 4"):
        assess_partition(MESH, lattice_graph(box(5, 1)), HALVES)


@pytest.mark.parametrize("name", ["weights", "limit_weights"])
@pytest.mark.parametrize(
    ("values", "message"),
    [
        ([1, 1, 1], r"shape \(3,\); wanted one number a cell, \(4,\)"),
        ([1, 1, -2, 1], r"\[2\] is -2.0; wanted finite numbers, at least 0"),
        ([1, np.nan, np.inf, 1], r"\[1\] is nan"),
        (["a", "b", "c", "d"], "wanted numbers"),
        ([1, 1e308, 1.1e308, 1], r"more than a float64 holds .*\[2\] = 1.1e\+308"),
    ],
)
def test_bad_cell_values(name, values, message):
    others = {"limits": 3.0} if name == "limit_weights" else {}
    with pytest.raises(WeightError, match=message) as caught:
        assess_partition(MESH, GRAPH, HALVES, **{name: values}, **others)
    assert str(caught.value).startswith(name)


@pytest.mark.parametrize("name", ["speeds", "limits"])
@pytest.mark.parametrize(
    ("values", "message"),
    [
        ([1, 1, 1], r"shape \(3,\); wanted one number a part, \(2,\)"),
        ([1, 0], r"\[1\] is 0.0; wanted finite numbers above 0"),
        ([np.inf, 1], r"\[0\] is inf"),
    ],
)
def test_bad_part_values(name, values, message):
    others = {"limit_weights": np.ones(4)} if name == "limits" else {}
    with pytest.raises(WeightError, match=message):
        assess_partition(MESH, GRAPH, HALVES, **{name: values}, **others)


def test_a_limit_needs_both_halves():
    with pytest.raises(WeightError, match="limits missing"):
        assess_partition(MESH, GRAPH, HALVES, limit_weights=np.ones(4))
    with pytest.raises(WeightError, match="limit_weights missing"):
        assess_partition(MESH, GRAPH, HALVES, limits=2.0)


def test_one_limit_serves_all_parts():
    found = assess_partition(MESH, GRAPH, HALVES, limit_weights=[1, 2, 3, 4], limits=10)
    assert found.part["limit_share"].tolist() == [0.3, 0.7]
