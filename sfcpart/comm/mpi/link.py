"""An exchange with a few ranks by persistent requests."""

from __future__ import annotations

import weakref
from collections.abc import Sequence
from typing import Any, ClassVar

from mpi4py import MPI

from sfcpart.comm.base import Stretch
from sfcpart.comm.mpi.rows import as_bytes, committed_row
from sfcpart.dtypes import Array
from sfcpart.errors import InputError, RankError

__all__ = ["MpiLink"]

_LINK_TAG = 2


class MpiLink:
    """A link of persistent requests (`sfcpart.comm.base.Link`)."""

    def __init__(
        self,
        comm: MPI.Intracomm,
        sent: Array,
        received: Array,
        targets: Sequence[Stretch],
        sources: Sequence[Stretch],
    ) -> None:
        row, sends, receives = committed_row(sent), as_bytes(sent), as_bytes(received)
        self._row_bytes = row.Get_size()

        def part(buffer: Array, lo: int, hi: int) -> tuple[Array, int, MPI.Datatype]:
            return buffer[lo * self._row_bytes : hi * self._row_bytes], hi - lo, row

        self._sources = [stretch for stretch in sources if self._has_bytes(stretch)]
        self._requests = [
            comm.Recv_init(part(receives, lo, hi), rank, _LINK_TAG)
            for rank, lo, hi in self._sources
        ]
        self._requests += [
            comm.Send_init(part(sends, lo, hi), rank, _LINK_TAG)
            for rank, lo, hi in targets
            if self._has_bytes((rank, lo, hi))
        ]
        self._statuses = [MPI.Status() for _ in self._requests]
        self._flight = _Flight([*self._requests, row])
        weakref.finalize(self, self._flight.free)

    def _has_bytes(self, stretch: Stretch) -> bool:
        """Tell whether a message is needed."""
        return self._row_bytes > 0 and stretch[2] > stretch[1]

    def start(self) -> None:
        """Send what the buffer holds now."""
        if self._flight.started:
            raise InputError("a link is started twice; finish it before it is started again")
        self._flight.started = True
        MPI.Prequest.Startall(self._requests)

    def finish(self) -> None:
        """Wait for all messages."""
        if not self._flight.started:
            raise InputError("a link is finished before it is started")
        try:
            MPI.Request.Waitall(self._requests, self._statuses)
            self._flight.started = False
        except MPI.Exception as error:
            raise RankError(f"an exchange with neighbours failed: {error}") from error
        for (rank, lo, hi), status in zip(self._sources, self._statuses, strict=False):
            came = status.Get_count(MPI.BYTE)
            if came != (hi - lo) * self._row_bytes:
                raise RankError(
                    f"{came} bytes from rank {rank}; wanted {hi - lo} rows of {self._row_bytes}"
                )


class _Flight:
    """MPI's side of a link: its handles, which hold on to the buffers, and whether it is used."""

    abandoned: ClassVar[list[list[Any]]] = []
    """Handles of links that were dropped before they finished: MPI may still write to buffers."""

    def __init__(self, handles: list[Any]) -> None:
        self.handles = handles
        self.started = False

    def free(self) -> None:
        """Free the handles, unless messages are on their way."""
        if self.started:
            self.abandoned.append(self.handles)
        elif not MPI.Is_finalized():
            for handle in self.handles:
                handle.Free()
