"""What every result must satisfy, said once."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.partition import Partition

__all__ = ["assert_partition", "part_weights"]


def assert_partition(
    partition: Partition,
    mesh: Any,
    n_parts: int,
    *,
    weights: ArrayLike | None = None,
    bottleneck: float | None = None,
    groups: ArrayLike | None = None,
) -> None:
    """Assert that a partition divides the cells of a mesh into `n_parts` as promised.

    Parameters
    ----------
    partition : Partition
        What a method returned.
    mesh : Mesh, or any value with n_cells, or int
        The mesh that was divided, or its number of cells.
    n_parts : int
        How many parts were asked for.
    weights : (n_cells,) numbers, optional
        Work of each cell: its sum over the parts must be the whole, cell by cell exactly.
    bottleneck : number, optional
        The most that a part may weigh (cells if no weights are given).
    groups : (n_cells,) integers, optional
        Cells with the same non-negative number must share a part; -1 = free.
    """
    n_cells = mesh if isinstance(mesh, int) else mesh.n_cells
    cell_part = partition.cell_part
    assert isinstance(partition, Partition)
    assert partition.n_parts == n_parts
    assert isinstance(cell_part, np.ndarray)
    assert cell_part.shape == (n_cells,)
    assert cell_part.dtype == np.int32
    assert not cell_part.flags.writeable, "cell_part can be written to"
    assert cell_part.min(initial=0) >= 0
    assert cell_part.max(initial=0) < n_parts
    _assert_none_empty(cell_part, n_parts, groups)
    weight = part_weights(cell_part, n_parts, weights)
    _assert_conserved(weight, n_cells, weights)
    if bottleneck is not None:
        heaviest = int(np.argmax(weight))
        assert weight[heaviest] <= bottleneck, (
            f"part {heaviest} weighs {weight[heaviest]}, more than {bottleneck}"
        )
    if groups is not None:
        _assert_together(cell_part, np.asarray(groups))


def part_weights(
    cell_part: np.ndarray, n_parts: int, weights: ArrayLike | None = None
) -> np.ndarray:
    """Sum the weights of each part, exactly for integers and correctly rounded for floats."""
    if weights is None:
        return np.bincount(cell_part, minlength=n_parts)
    weight = np.asarray(weights)
    if weight.dtype.kind in "iub":
        total = np.zeros(n_parts, np.int64)
        np.add.at(total, cell_part, weight)
        return total
    return np.array([math.fsum(weight[cell_part == part]) for part in range(n_parts)])


def _assert_none_empty(cell_part: np.ndarray, n_parts: int, groups: ArrayLike | None) -> None:
    """Assert that no part is empty while there is something to put into it."""
    n_movable = len(cell_part)
    if groups is not None:
        group = np.asarray(groups)
        n_movable = int(np.sum(group < 0)) + len(np.unique(group[group >= 0]))
    size = np.bincount(cell_part, minlength=n_parts)
    empty = np.flatnonzero(size == 0)
    assert n_parts - len(empty) >= min(n_parts, n_movable), f"part {empty[0]} is empty"


def _assert_conserved(weight: np.ndarray, n_cells: int, weights: ArrayLike | None) -> None:
    """Assert that the parts' weights add up to the whole."""
    whole = np.ones(n_cells, np.int64) if weights is None else np.asarray(weights)
    assert len(whole) == n_cells
    if whole.dtype.kind in "iub":
        assert sum(weight.tolist()) == sum(whole.tolist())
    else:
        assert math.isclose(math.fsum(weight), math.fsum(whole), rel_tol=1e-12)


def _assert_together(cell_part: np.ndarray, group: np.ndarray) -> None:
    """Assert that no group is divided."""
    for number in np.unique(group[group >= 0]):
        parts = np.unique(cell_part[group == number])
        assert len(parts) == 1, f"group {number} is divided among parts {parts.tolist()}"
