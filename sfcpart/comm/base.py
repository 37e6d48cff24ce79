"""The handful of collectives that every distributed algorithm here is written over.

Three communicators keep the contract (`tests/unit/comm`, `tests/mpi`): `SerialComm` (one rank),
`ThreadComm` (ranks as threads of one process) and `MpiComm` (mpi4py). An algorithm takes a
`comm`, calls these methods in the same order on every rank, and never asks whether the size is 1.

Arrays are numpy arrays of any fixed-size dtype (bool and structured too, not object); every rank
passes the same dtype; results are in native byte order. A result belongs to the caller, who may
write to it; it may share memory with the argument (with one rank it often is the argument), so
whoever writes to the result has given the argument away.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any, Literal, Protocol

from sfcpart.dtypes import Array

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
