"""A communicator that counts what its rank sends and receives.

Bytes are those that go out and come in on one rank with the usual algorithms (R. Thakur, R.
Rabenseifner, W. Gropp, IJHPCA 19:49 (2005), from memory): a reduction of b bytes sends about 2 b
and receives as much; a gathering sends and receives the whole; a broadcast receives b and sends b
on; a prefix sum of b bytes exchanges b with log2 R ranks. What stays on a rank is not counted.
Rows of `alltoall` and of links are counted apart (`bytes["rows"]`, `"rows sent"`, `"rows
received"`). A round is one collective, as `MpiComm` makes it: a gathering, an exchange and a
broadcast tell the lengths first; a relay is a message in and one out, and the broadcast of the end.
"""

from __future__ import annotations

from collections import Counter
from math import ceil, log2
from typing import Any

import numpy as np

HEAD = 16
"""Bytes with which `MpiComm` tells a rank the number and form of rows that it will get."""


class Counted:
    """A rank of another communicator; counts rounds and bytes of each collective by name."""

    def __init__(self, comm: Any) -> None:
        self._comm = comm
        self.rounds: Counter[str] = Counter()
        self.bytes: Counter[str] = Counter()

    @property
    def rank(self) -> int:
        """Number of this rank."""
        return self._comm.rank

    @property
    def size(self) -> int:
        """Number of ranks."""
        return self._comm.size

    def _note(self, name: str, n_bytes: float, *, rounds: int = 1) -> None:
        """Count."""
        self.rounds[name] += rounds
        self.bytes[name] += int(n_bytes)

    def barrier(self) -> None:
        """Wait for all."""
        self._note("barrier", 0)
        self._comm.barrier()

    def allreduce(self, array: Any, op: str = "sum") -> Any:
        """Reduce."""
        self._note("allreduce", 4 * np.asarray(array).nbytes)
        return self._comm.allreduce(array, op)

    def exscan(self, array: Any) -> Any:
        """Sum over lower ranks."""
        self._note("exscan", 2 * np.asarray(array).nbytes * ceil(log2(max(2, self.size))))
        return self._comm.exscan(array)

    def allgather(self, array: Any) -> list:
        """Gather on all ranks."""
        whole = self._comm.allgather(array)
        self._note("allgather", 2 * (sum(a.nbytes for a in whole) + HEAD * self.size), rounds=2)
        return whole

    def bcast(self, array: Any, root: int = 0) -> Any:
        """Spread from one rank."""
        sent = self._comm.bcast(array, root)
        self._note("bcast", 2 * sent.nbytes, rounds=2)
        return sent

    def alltoall(self, arrays: Any) -> list:
        """Exchange between all."""
        came = self._comm.alltoall(arrays)
        moved = sum(
            np.asarray(a).nbytes for side in (arrays, came) for r, a in enumerate(side)
            if r != self.rank
        )  # fmt: skip
        self._note("alltoall", 2 * HEAD * self.size, rounds=2)
        self.bytes["rows"] += moved
        return came

    def link(self, sent: Any, received: Any, *, targets: Any, sources: Any) -> CountedLink:
        """Set up an exchange with neighbours."""
        return CountedLink(self, sent, received, targets=targets, sources=sources)

    def relay(self, array: Any, step: Any, *, towards: str) -> Any:
        """Hand on."""
        size = [0, 0]

        def counted(came: Any) -> Any:
            made = step(came)
            size[:] = came.nbytes, made.nbytes
            return made

        result = self._comm.relay(array, counted, towards=towards)
        self._note("relay", sum(size) + 2 * (result.nbytes + HEAD), rounds=2)
        return result

    def bcast_object(self, value: Any, root: int = 0) -> Any:
        """Spread a small value."""
        self._note("bcast_object", 0)
        return self._comm.bcast_object(value, root)

    def check(self, error: Any) -> None:
        """Share errors."""
        self._note("check", 4 * 16)
        self._comm.check(error)


class CountedLink:
    """A link that counts the rows it sends to other ranks and gets from them."""

    def __init__(self, comm: Counted, sent: Any, received: Any, *, targets: Any, sources: Any):
        self._link = comm._comm.link(sent, received, targets=targets, sources=sources)
        self._comm = comm
        row = sent.dtype.itemsize * int(np.prod(sent.shape[1:]))
        self._bytes = [
            row * sum(hi - lo for rank, lo, hi in side if rank != comm.rank)
            for side in (targets, sources)
        ]

    def start(self) -> None:
        """Send."""
        self._comm._note("link", 0)
        for way, n_bytes in zip(("rows sent", "rows received"), self._bytes, strict=True):
            self._comm.bytes[way] += n_bytes
        self._link.start()

    def finish(self) -> None:
        """Receive."""
        self._link.finish()
