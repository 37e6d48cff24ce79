"""The dynamic programme over wide windows, where the bounds are kept by it alone."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import PartitionError
from sfcpart.kernels.curve.least_moves import least_moves
from sfcpart.resplit.shift import shift
from sfcpart.resplit.warm import warm_up
from tests.oracles.least_moves import least_moved_weight
from tests.unit.resplit.lines import line_task


def kept(weight, cuts, most, second, limit) -> int:
    """Return what the best choice keeps if cuts may lie anywhere."""
    n, n_parts = len(weight), len(most)
    sums = np.concatenate(([0], np.cumsum(weight)))
    low, high = np.zeros(n_parts + 1, np.int64), np.full(n_parts + 1, n)
    high[0], low[-1] = 0, n
    width = high - low + 1
    edges = sums[np.asarray(cuts)]
    return least_moves(
        low, high, sums, np.concatenate(([0], np.cumsum(second))), np.asarray(most),
        np.asarray(limit), np.column_stack([edges[:-1], edges[1:]]),
        np.empty((2, n + 1), np.int64), np.empty(n + 1, np.int64),
        np.concatenate(([0], np.cumsum(width)[:-1])), np.empty(width.sum(), np.int32),
        np.empty(n_parts + 1, np.int64),
    )  # fmt: skip


@pytest.mark.parametrize("seed", range(6))
def test_bounds_of_both_weights_are_kept(seed):
    rng = np.random.default_rng(seed)
    weight, second = rng.integers(1, 9, 12), rng.integers(0, 4, 12)
    most, limit = np.full(3, weight.sum() // 2), np.full(3, max(3, second.sum() // 2))
    cuts = [0, 2, 9, 12]
    least = least_moved_weight(
        weight.tolist(), np.repeat([0, 1, 2], np.diff(cuts)).tolist(), [0, 1, 2], most.tolist(),
        limit_weight=second.tolist(), limit=limit.tolist(),
    )  # fmt: skip
    found = kept(weight, cuts, most, second, limit)
    assert found == (-1 if least is None else weight.sum() - least)


def test_no_choice_is_told():
    none = np.zeros(4, np.int64)
    assert kept(np.array([5, 5, 5, 5]), [0, 2, 4], [9, 9], none, [1, 1]) == -1


def test_old_stretches_of_another_curve_are_refused_also_when_warming_up():
    warm_up("shift", "rows")  # which cannot be done; it says so where it matters
    x = np.stack(np.meshgrid(np.arange(4.0), np.arange(4.0)), -1).reshape(-1, 2)
    task = line_task(np.repeat([0, 1], 8), n_parts=2, x=np.arange(16), method="rows")
    assert shift(task).tolist() == [0] * 8 + [1] * 8
    with pytest.raises(PartitionError, match="no stretches"):
        shift(line_task((x[:, 0] + x[:, 1]) % 2, n_parts=2))
