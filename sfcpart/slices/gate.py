"""The gate of exchanges: cell numbers checked and cast, errors of one rank made all ranks'."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, TypeVar

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import GID, Int64Array
from sfcpart.errors import InputError

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["agreed", "checked_gids", "sorted_gids"]

T = TypeVar("T")


def agreed(comm: Comm, make: Callable[[], T]) -> T:
    """Return what `make` returns; if it fails on some rank, all ranks raise that error."""
    error: Exception | None = None
    made: list[T] = []
    try:
        made.append(make())
    except Exception as caught:  # whatever it is, the other ranks must not wait for this one
        error = caught
    comm.check(error)
    return made[0]


def checked_gids(numbers: ArrayLike, what: str) -> Int64Array:
    """Return global cell numbers as (n,) int64; refuse other shapes and types."""
    array = np.asarray(numbers)
    if array.size == 0:
        array = array.astype(GID)
    if array.ndim != 1 or array.dtype.kind not in "iu":
        raise InputError(
            f"{what} is {array.dtype} of shape {array.shape}; wanted whole numbers, one a row"
        )
    if array.dtype == np.uint64 and array.size and array.max() > np.iinfo(GID).max:
        raise InputError(f"{what} holds {array.max()}; wanted numbers below 2^63")
    return array.astype(GID, copy=False)


def sorted_gids(cell_gid: Int64Array) -> tuple[Int64Array, Int64Array]:
    """Return the numbers of owned cells ascending and their rows; refuse doubles and negatives."""
    row = np.argsort(cell_gid, kind="stable")
    gid = cell_gid[row]
    if len(gid) and gid[0] < 0:
        raise InputError(f"row {row[0]} has cell_gid {gid[0]}; wanted numbers from 0 on")
    twice = np.flatnonzero(gid[1:] == gid[:-1])
    if len(twice):
        first, second = row[twice[0] : twice[0] + 2]
        raise InputError(
            f"rows {first} and {second} are both cell {gid[twice[0]]}; wanted every cell once"
        )
    return gid, row
