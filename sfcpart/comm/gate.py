"""The gate of the communicators: arrays checked and cast, errors packed to travel."""

from __future__ import annotations

import pickle
from collections.abc import Sequence
from contextlib import suppress

import numpy as np

from sfcpart.comm.base import Stretch
from sfcpart.dtypes import Array, Int64Array
from sfcpart.errors import InputError, RankError

__all__ = [
    "check_buffers",
    "check_root",
    "check_stretches",
    "comparable",
    "movable",
    "parcel",
    "raise_parcel",
    "reducible",
    "relayed",
    "rooted",
    "row_form",
    "same_rows",
    "summable",
]


def summable(array: Array) -> Array:
    """Cast integers to the dtype sums are made in; refuse the rest."""
    array = np.asarray(array)
    if array.dtype.kind not in "iu":
        raise InputError(
            f"sum over ranks of {array.dtype} values; wanted integers: quantise floats to int64 "
            "(their order would show) and cast bools to int64"
        )
    return np.asarray(array, np.uint64 if array.dtype == np.uint64 else np.int64)


def comparable(array: Array) -> Array:
    """Pass bools, integers and floats (with -0.0 as 0.0) in native byte order; refuse the rest."""
    array = np.asarray(array)
    if array.dtype.kind not in "biuf":
        raise InputError(
            f"min or max over ranks of {array.dtype} values; wanted bools, integers or floats"
        )
    if array.dtype.kind == "f":
        return np.asarray(array + 0.0, array.dtype.newbyteorder("="))
    return np.asarray(array, array.dtype.newbyteorder("="))


def reducible(array: Array, op: str) -> Array:
    """Cast an array to what `op` works on."""
    if op == "sum":
        return summable(array)
    if op in ("min", "max"):
        return comparable(array)
    raise InputError(f"reduction {op!r}; wanted 'sum', 'min' or 'max'")


def movable(array: Array) -> Array:
    """Return rows C-contiguous and in native byte order; refuse what has no fixed size."""
    array = np.asarray(array)
    if array.dtype.hasobject or array.ndim == 0:
        what = "a single value" if array.ndim == 0 else f"{array.dtype} values"
        raise InputError(f"{what} to exchange; wanted an array of rows of a fixed-size dtype")
    if not array.dtype.isnative:
        array = array.astype(array.dtype.newbyteorder("="))
    return np.ascontiguousarray(array)


def same_rows(arrays: Sequence[Array], size: int) -> list[Array]:
    """Return the arrays, movable; refuse a wrong number of them or rows that differ in form."""
    rows = [movable(array) for array in arrays]
    if len(rows) != size:
        raise InputError(f"{len(rows)} arrays for {size} ranks; wanted one for each rank")
    forms = [row_form(array) for array in rows]
    if len(set(forms)) > 1:
        bad = next(r for r, form in enumerate(forms) if form != forms[0])
        raise InputError(
            f"the array for rank {bad} holds {forms[bad]} and that for rank 0 {forms[0]}; "
            "wanted one dtype and trailing shape"
        )
    return rows


def row_form(array: Array) -> str:
    """Describe a row of an array: its dtype and trailing shape."""
    dtype = array.dtype
    return f"{dtype.descr if dtype.names else dtype.str} rows of shape {array.shape[1:]}"


def relayed(array: Int64Array) -> Int64Array:
    """Return an array that can be handed on; refuse what is not int64 of one axis."""
    if not isinstance(array, np.ndarray) or array.dtype != np.int64 or array.ndim != 1:
        raise InputError(f"{array!r} to hand on; wanted an int64 array of one axis")
    return np.ascontiguousarray(array)


def rooted(array: Array | None, *, root: int, rank: int) -> Array | None:
    """Return the root's array, movable, and None on the other ranks."""
    if rank != root:
        return None
    if array is None:
        raise InputError(f"rank {root} broadcasts None; wanted an array on the root")
    return movable(array)


def check_root(root: int, size: int) -> None:
    """Refuse a root that is no rank."""
    if not 0 <= root < size:
        raise InputError(f"root is {root}; ranks go from 0 to {size - 1}")


def check_buffers(sent: Array, received: Array) -> None:
    """Refuse the buffers of a link that cannot be sent from or received into."""
    for array in (sent, received):
        movable(array)
        if not array.flags.c_contiguous or not array.dtype.isnative:
            raise InputError(
                f"a buffer of {row_form(array)} is not C-contiguous in native byte order; "
                "wanted one that rows can be sent from as they are"
            )
    if not received.flags.writeable:
        raise InputError("the buffer to receive into is read-only; wanted a writable one")
    if row_form(sent) != row_form(received):
        raise InputError(
            f"the buffers hold {row_form(sent)} and {row_form(received)}; "
            "wanted one dtype and trailing shape"
        )


def check_stretches(stretches: Sequence[Stretch], n_rows: int, size: int) -> None:
    """Refuse stretches of no rank, of rows that are not there, or two for one rank."""
    for rank, lo, hi in stretches:
        if not 0 <= rank < size:
            raise InputError(f"a stretch for rank {rank}; ranks go from 0 to {size - 1}")
        if not 0 <= lo <= hi <= n_rows:
            raise InputError(f"rows {lo} to {hi} for rank {rank} of a buffer of {n_rows} rows")
    ranks = [rank for rank, _, _ in stretches]
    if len(set(ranks)) < len(ranks):
        twice = next(rank for place, rank in enumerate(ranks) if rank in ranks[:place])
        raise InputError(f"two stretches for rank {twice}; wanted one")


def parcel(error: BaseException, rank: int) -> bytes:
    """Pickle an error so that every rank can raise it; one that cannot travel becomes RankError."""
    try:
        packed = pickle.dumps(error)
        twin = pickle.loads(packed)
        if type(twin) is type(error) and str(twin) == str(error):
            return packed
    except Exception:
        pass  # whatever a foreign class does when pickled: told below
    text = f"rank {rank} failed with {type(error).__name__}: {error}"
    return pickle.dumps(RankError(text))


def raise_parcel(packed: bytes, own: BaseException | None, *, rank: int) -> None:
    """Raise the error in a parcel: this rank's own object if it is the same, for its traceback.

    `rank` is the one that failed, -1 if all did.
    """
    error: BaseException = pickle.loads(packed)
    if own is not None and type(own) is type(error) and str(own) == str(error):
        error, own = own, None
    with suppress(AttributeError, TypeError):  # a foreign class may refuse
        error.on_rank = rank  # type: ignore[attr-defined]
    if own is None:
        raise error
    raise error from own
