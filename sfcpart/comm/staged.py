"""Links over `alltoall`, for communicators whose ranks share a process."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from sfcpart.comm.base import Stretch
from sfcpart.comm.gate import check_buffers, check_stretches
from sfcpart.dtypes import Array
from sfcpart.errors import InputError, RankError

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["StagedLink"]


class StagedLink:
    """A link whose rows wait between start and finish (`sfcpart.comm.base.Link`)."""

    def __init__(
        self,
        comm: Comm,
        sent: Array,
        received: Array,
        *,
        targets: Sequence[Stretch],
        sources: Sequence[Stretch],
    ) -> None:
        check_buffers(sent, received)
        check_stretches(targets, len(sent), comm.size)
        check_stretches(sources, len(received), comm.size)
        self._comm, self._sent, self._received = comm, sent, received
        self._targets, self._sources = list(targets), list(sources)
        self._came: list[Array] | None = None

    def start(self) -> None:
        """Send what the buffer holds now."""
        if self._came is not None:
            raise InputError("a link is started twice; finish it before it is started again")
        rows = [self._sent[:0]] * self._comm.size
        for rank, lo, hi in self._targets:
            rows[rank] = self._sent[lo:hi]
        self._came = self._comm.alltoall(rows)

    def finish(self) -> None:
        """Put what came into the buffer."""
        if self._came is None:
            raise InputError("a link is finished before it is started")
        came, self._came = self._came, None
        for rank, lo, hi in self._sources:
            if len(came[rank]) != hi - lo:
                raise RankError(f"{len(came[rank])} rows from rank {rank}; wanted {hi - lo}")
            self._received[lo:hi] = came[rank]
