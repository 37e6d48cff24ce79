"""The handful of collectives that every distributed algorithm here is written over.

Three communicators keep the contract (`tests/unit/comm`, `tests/mpi`): `SerialComm` (one rank),
`ThreadComm` (ranks as threads of one process) and `MpiComm` (mpi4py). An algorithm takes a
`comm`, calls these methods in the same order on every rank, and never asks whether the size is 1.

Arrays are numpy arrays of any fixed-size dtype (bool and structured too, not object); every rank
passes the same dtype; results are in native byte order. A result belongs to the caller, who may write to it;
it may share memory with the argument (with one rank it often is the argument), so whoever writes
to the result has given the argument away. What is passed must not be written to by another
thread during the call.
"""

from __future__ import annotations

import pickle
from collections.abc import Sequence
from typing import Any, Literal, Protocol

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import InputError, RankError

__all__ = ["Comm", "Reduction"]

Reduction = Literal["sum", "min", "max"]


class Comm(Protocol):
    """Ranks that work together; all methods but the properties are collective."""

    @property
    def rank(self) -> int:
        """Number of this rank, 0 <= rank < size."""

    @property
    def size(self) -> int:
        """Number of ranks."""

    def barrier(self) -> None:
        """Return once every rank has arrived."""

    def allreduce(self, array: Array, op: Reduction = "sum") -> Array:
        """Combine equal-shaped arrays elementwise; every rank gets the result.

        Sums take integers only and come back as int64 (uint64 as uint64): a float sum is refused,
        since its order would show; quantise to int64 first. "min" and "max" take bools, integers
        and floats and keep the dtype; a NaN on any rank gives NaN, and -0.0 counts as 0.0.
        """

    def exscan(self, array: Array) -> Array:
        """Return the elementwise sum over lower ranks (zeros on rank 0); dtypes as for sums."""

    def allgather(self, array: Array) -> list[Array]:
        """Return the arrays of all ranks in rank order (lengths may differ, trailing shape not)."""

    def bcast(self, array: Array | None, root: int = 0) -> Array:
        """Return the root's array on every rank (the others may pass None)."""

    def alltoall(self, arrays: Sequence[Array]) -> list[Array]:
        """Send `arrays[r]` to rank r; return what each rank sent here, in rank order.

        Lengths may differ; dtype and trailing shape may not.
        """

    def bcast_object(self, value: Any, root: int = 0) -> Any:
        """Return the root's small picklable value on every rank (never bulk data)."""

    def check(self, error: BaseException | None) -> None:
        """Turn an error of any rank into the same error on all.

        Every rank passes its error or None. If some rank has one, every rank raises the lowest
        failing rank's: same class, same text (a `RankError` that quotes it if it cannot travel).
        Ranks that fail alike need no rank in the text; call it at the end of each stage that can
        fail on one rank alone.
        """


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
    """Return a C-contiguous native array of one dimension or more; refuse what has no fixed size."""
    array = np.asarray(array)
    if array.dtype.hasobject or array.ndim == 0:
        what = "a single value" if array.ndim == 0 else f"{array.dtype} values"
        raise InputError(f"{what} to exchange; wanted an array of rows of a fixed-size dtype")
    return np.ascontiguousarray(array, array.dtype.newbyteorder("="))


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


def rooted(array: Array | None, root: int, rank: int) -> Array | None:
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


def raise_parcel(packed: bytes, own: BaseException | None) -> None:
    """Raise the error in a parcel: this rank's own object if it is the same, for its traceback."""
    error: BaseException = pickle.loads(packed)
    if own is not None and type(own) is type(error) and str(own) == str(error):
        raise own
    raise error from own
