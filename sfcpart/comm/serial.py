"""One rank: every collective is the identity, and nothing is copied."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import Any

import numpy as np

from sfcpart.comm.base import Direction, Reduction, Stretch
from sfcpart.comm.gate import (
    check_root,
    movable,
    reducible,
    relayed,
    rooted,
    same_rows,
    summable,
)
from sfcpart.comm.staged import StagedLink
from sfcpart.dtypes import Array, Int64Array

__all__ = ["SerialComm"]


class SerialComm:
    """The communicator of a single process (`sfcpart.comm.base.Comm` has the contract).

    Examples
    --------
    >>> import numpy as np
    >>> comm = SerialComm()
    >>> comm.rank, comm.size
    (0, 1)
    >>> comm.exscan(np.array([4, 2])).tolist()
    [0, 0]
    """

    @property
    def rank(self) -> int:
        """Number of this rank: 0."""
        return 0

    @property
    def size(self) -> int:
        """Number of ranks: 1."""
        return 1

    def barrier(self) -> None:
        """Return at once."""

    def allreduce(self, array: Array, op: Reduction = "sum") -> Array:
        """Return the array itself, cast as the contract says."""
        return reducible(array, op)

    def exscan(self, array: Array) -> Array:
        """Return zeros: there is no lower rank."""
        return np.zeros_like(summable(array))

    def allgather(self, array: Array) -> list[Array]:
        """Return a list of the array itself."""
        return [movable(array)]

    def bcast(self, array: Array | None, root: int = 0) -> Array:
        """Return the array itself."""
        check_root(root, 1)
        sent = rooted(array, root=root, rank=0)
        assert sent is not None
        return sent

    def alltoall(self, arrays: Sequence[Array]) -> list[Array]:
        """Return the one array itself, in a list."""
        return same_rows(arrays, 1)

    def link(
        self,
        sent: Array,
        received: Array,
        *,
        targets: Sequence[Stretch],
        sources: Sequence[Stretch],
    ) -> StagedLink:
        """Set up an exchange between two buffers."""
        return StagedLink(self, sent, received, targets=targets, sources=sources)

    def relay(
        self, array: Int64Array, step: Callable[[Int64Array], Int64Array], *, towards: Direction
    ) -> Int64Array:
        """Return what the one step makes."""
        return relayed(step(relayed(array)))

    def bcast_object(self, value: Any, root: int = 0) -> Any:
        """Return the value itself."""
        check_root(root, 1)
        return value

    def check(self, error: BaseException | None) -> None:
        """Raise the error, if there is one."""
        if error is not None:
            raise error
