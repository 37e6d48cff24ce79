"""The suite's own tools: what `assert_partition` must notice, and that the odd meshes are there."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import MeshError
from sfcpart.partition import Partition
from tests.assertions import assert_partition, part_weights
from tests.strategies import DEGENERATE

GOOD = Partition.from_array([0, 0, 1, 1, 2, 2])


def raw(values, n_parts: int = 3, *, dtype=np.int32, writeable: bool = False) -> Partition:
    """Make a partition past its own checks."""
    array = np.array(values, dtype)
    array.flags.writeable = writeable
    return Partition(cell_part=array, n_parts=n_parts)


def test_a_good_partition_passes():
    assert_partition(GOOD, 6, 3)
    assert_partition(GOOD, 6, 3, weights=[0.1] * 6, bottleneck=0.2, groups=[5, 5, -1, -1, 2, 2])
    assert_partition(raw([0, 1], 5), 2, 5)  # fewer cells than parts


@pytest.mark.parametrize(
    ("partition", "options"),
    [
        (raw([0, 0, 1, 1, 2]), {}),
        (raw([0, 0, 1, 1, 2, 2], dtype=np.int64), {}),
        (raw([0, 0, 1, 1, 2, 2], writeable=True), {}),
        (raw([0, 0, 1, 1, 2, 3]), {}),
        (raw([0, 0, 1, 1, 2, -1]), {}),
        (raw([0, 0, 0, 2, 2, 2]), {}),
        (raw([0, 0, 1, 1, 1, 1], 2), {}),
        (GOOD, {"bottleneck": 1}),
        (GOOD, {"weights": [1, 2, 1, 1, 1, 1], "bottleneck": 2}),
        (GOOD, {"weights": [1, 1]}),
        (GOOD, {"groups": [-1, 0, 0, -1, -1, -1]}),
    ],
    ids=[
        *["a cell missing", "dtype", "writeable", "too high", "negative", "an empty part"],
        *["n_parts", "too many cells", "too heavy", "weights of other cells", "a group divided"],
    ],
)
def test_a_fault_is_noticed(partition, options):
    with pytest.raises((AssertionError, ValueError)):
        assert_partition(partition, 6, 3, **options)


def test_part_weights_are_exact():
    heavy = [2**53, 1, 2**53, 1, 1, 1]  # floats would lose the ones
    assert part_weights(GOOD.cell_part, 3, heavy).tolist() == [2**53 + 1, 2**53 + 1, 2]


def test_degenerate_meshes_are_what_their_names_say():
    mesh = {name: make().mesh for name, make in DEGENERATE.items()}
    assert mesh["one_cell"].n_cells == 1
    assert DEGENERATE["parts_as_cells"]().n_parts == mesh["parts_as_cells"].n_cells
    assert len(np.unique(mesh["coincident_cells"].centers, axis=0)) == 1
    assert not mesh["zero_measure"].measures.any()
    assert mesh["tilted_in_space"].space_dim == 3
    assert len(set(mesh["mixed_space"].kind.tolist())) == 4


def test_an_empty_mesh_cannot_be_made(empty_call):
    with pytest.raises(MeshError, match="no cells"):
        empty_call()
