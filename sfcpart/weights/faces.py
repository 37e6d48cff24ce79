"""What a cut face costs a graph method: each the same, or as much as it measures."""

from __future__ import annotations

from typing import Literal, TypeAlias

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.errors import WeightError

__all__ = ["FACE_WEIGHTS", "FaceWeight", "face_weights"]

FaceWeight: TypeAlias = Literal["count", "measure"]

FACE_WEIGHTS: tuple[FaceWeight, ...] = ("count", "measure")

_BITS = 20  # a face 10^6 times smaller than the largest costs as good as nothing


def face_weights(measure: FloatArray, *, by: FaceWeight, comm: Comm | None = None) -> Int64Array:
    """Return an integer weight >= 1 for each entry of a cell graph.

    Parameters
    ----------
    measure : (n_entries,) float64
        `CellGraph.data`: face measures >= 0, alike in both directions.
    by : {"count", "measure"}
        1 each; or in proportion to the measure, at least 1, such that all sum up to 2**53 at most
        and the largest is at most 2**20.
    comm : Comm, optional
        Ranks that hold the rows of one graph, and weigh alike (collective).

    Raises
    ------
    WeightError
        If a measure is negative or not finite (on all ranks).

    Notes
    -----
    O(n). Alike in both directions, for any number of threads.

    Examples
    --------
    >>> face_weights(np.array([0.5, 0.25, 0.5, 0.25]), by="count").tolist()
    [1, 1, 1, 1]
    >>> weight = face_weights(np.array([0.5, 0.25, 0.5, 0.25]), by="measure")
    >>> (weight / weight.min()).tolist()
    [2.0, 1.0, 2.0, 1.0]
    """
    comm = comm or SerialComm()
    if by == "count":
        return np.ones(len(measure), np.int64)
    comm.check(_unusable(measure))
    n = int(comm.allreduce(np.array([len(measure)], np.int64))[0])
    largest = float(comm.allreduce(measure.max(initial=0.0, keepdims=True), "max")[0])
    if largest == 0.0:
        return np.ones(len(measure), np.int64)
    # n entries below 2**bits each, n < 2**n.bit_length(): the sum stays below 2**52, plus 1 each
    bits = min(_BITS, 52 - n.bit_length())
    exponent = bits - int(np.frexp(largest)[1])
    return np.maximum(np.rint(np.ldexp(measure, exponent)), 1.0).astype(np.int64)


def _unusable(measure: FloatArray) -> WeightError | None:
    """Return an error if a measure is negative or not finite."""
    wrong = np.flatnonzero(~((measure >= 0) & np.isfinite(measure)))
    if not len(wrong):
        return None
    return WeightError(
        f"face entry {wrong[0]} measures {measure[wrong[0]]}; wanted finite numbers >= 0"
    )
