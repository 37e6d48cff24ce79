"""Queues over ranks: what stands before each item in the line of its label.

Items stand by bucket, then by gid (ranks hold ascending gids), each with a weight. A histogram of
buckets is added up over the ranks, nothing is sorted across them: one sum and one prefix sum over
(labels in use) x (buckets) numbers.
"""

from __future__ import annotations

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import Array, Int64Array

__all__ = ["BUCKETS", "bucket_of", "weight_before"]

BUCKETS = 32


def bucket_of(loss: Int64Array, weight: Int64Array) -> Int64Array:
    """Return the bucket of a loss per weight: 0 for gains, then two to a doubling.

    `loss` below 2**53; one weight unit of loss 1 falls in the middle.
    """
    rate = np.where(loss > 0, (loss * 256) // np.maximum(weight, 1) + 1, 0)
    mantissa, exponent = np.frexp(rate.astype(np.float64))
    steps = 2 * exponent + (mantissa >= 0.75) - 1
    return np.where(rate > 0, np.clip(steps, 1, BUCKETS - 1), 0).astype(np.int64)


def weight_before(
    comm: Comm, label: Array, bucket: Array, weight: Int64Array, n_labels: int
) -> Int64Array:
    """Return the weight of the items before each of this rank's, (n_items,), on all ranks.

    Parameters
    ----------
    label, bucket, weight : (n_items,) integers
        This rank's items by ascending gid; 0 <= label < n_labels, 0 <= bucket < BUCKETS.
    """
    in_use = np.zeros(n_labels, np.bool_)
    in_use[label] = True
    in_use = comm.allreduce(in_use, "max")
    row = np.cumsum(in_use) - 1
    cell = row[label] * BUCKETS + bucket
    here = np.zeros(int(in_use.sum()) * BUCKETS, np.int64)
    np.add.at(here, cell, weight)
    lower = comm.exscan(here)
    whole = comm.allreduce(here.copy()).reshape(-1, BUCKETS)
    base = (np.cumsum(whole, axis=1) - whole).reshape(-1) + lower
    order = np.argsort(cell, kind="stable")
    running = np.cumsum(weight[order]) - weight[order]
    sorted_cell = cell[order]
    first = np.searchsorted(sorted_cell, sorted_cell, side="left")
    before = np.empty(len(cell), np.int64)
    before[order] = running - running[first] + base[sorted_cell]
    return before
