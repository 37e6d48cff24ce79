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

from collections.abc import Callable, Sequence
from typing import Any, Literal, Protocol, TypeAlias

from sfcpart.dtypes import Array, Int64Array

__all__ = ["Comm", "Direction", "Link", "Reduction", "Stretch"]

Reduction = Literal["sum", "min", "max"]
Direction = Literal["first", "last"]
"""The rank at which a relay ends."""
Stretch: TypeAlias = tuple[int, int, int]
"""A rank with the first row of a buffer that goes to it or comes from it, and the row after."""


class Link(Protocol):
    """One exchange with a few ranks, set up once and made any number of times (`Comm.link`)."""

    def start(self) -> None:
        """Send what the buffer `sent` holds now; leave both buffers alone until `finish`."""

    def finish(self) -> None:
        """Return once `received` holds what came and `sent` may be written to again."""


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

    def link(
        self,
        sent: Array,
        received: Array,
        *,
        targets: Sequence[Stretch],
        sources: Sequence[Stretch],
    ) -> Link:
        """Set up an exchange of rows between two C-contiguous buffers of one form, by neighbours.

        Row lo to hi - 1 of `sent` goes to each (rank, lo, hi) of `targets`, and what comes from
        each of `sources` is put into those rows of `received`; at most one stretch a rank and
        side, and both ends must mean the same number of rows. Under MPI nothing is sent to
        others, setting up is local, and `finish` raises RankError where fewer or more bytes come.
        All ranks start and finish their links in the same order, also those without neighbours;
        several links may be on their way at once, and collectives may be called meanwhile.
        """

    def relay(
        self, array: Int64Array, step: Callable[[Int64Array], Int64Array], *, towards: Direction
    ) -> Int64Array:
        """Hand an array from rank to rank, each of which makes of it what the next one gets.

        The rank furthest from the one named by `towards` calls `step(array)`, its neighbour `step`
        with what that returned, and so on; every rank returns what the last one made. A rank takes
        part in one message in, one out and one broadcast, whatever the number of ranks; only the
        time grows with it. Arrays are int64 of one axis, of any length; `step` calls no collective
        and may change what it gets, but for the very first array. If it raises on a rank, no
        further rank is asked, and all raise that error.
        """

    def bcast_object(self, value: Any, root: int = 0) -> Any:
        """Return the root's small picklable value on every rank (never bulk data)."""

    def check(self, error: BaseException | None) -> None:
        """Turn an error of any rank into the same error on all.

        Every rank passes its error or None. If some rank has one, every rank raises the lowest
        failing rank's: same class, same text (a `RankError` that quotes it if it cannot travel).
        Ranks that fail alike need no rank in the text; call it at the end of each stage that can
        fail on one rank alone. Where only some ranks failed, the error's attribute `on_rank` is
        the lowest of them, else -1; what ends the job tells it (`sfcpart.comm.ending`).
        """
