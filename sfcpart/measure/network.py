"""Measure how long messages take between the ranks of this job, and fit the message model.

Two ranks hand rows of a few sizes to and fro; half a round trip is the time of a message. Pairs
that share a node are measured apart from pairs that do not (by host names), a few of each, one
after another, so that no pair disturbs the next. Of each size the median over samples, then over
pairs, is kept: a late sample (the system was busy) does not count. The model is

    seconds = latency + bytes / bandwidth,

fitted by least squares of relative deviations, so that small messages count as much as large ones.
No such pair of numbers fits small and large messages alike; how far off it is, is told with it.

Source: R. W. Hockney, The communication challenge for MPP: Intel Paragon and Meiko CS-2, Parallel
Computing 20:389 (1994), from memory: T(m) = t0 + m / r_inf.
Cost: a second or so; every rank takes part, idle ones wait.
"""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from itertools import pairwise
from socket import gethostname
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int64Array
from sfcpart.errors import InputError

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm, Link

__all__ = ["MessageFit", "NetworkFigures", "fit_messages", "measure_messages"]

SMALLEST, GROWTH = 8, 4
MOST_PAIRS = 4
SAMPLES = 9
BYTES_A_SAMPLE = 1 << 19
MOST_TRIPS = 100


@dataclass(frozen=True, eq=False)
class MessageFit:
    """Messages between pairs of ranks that lie alike, and the model fitted to them.

    Attributes
    ----------
    where : {"on-node", "across-nodes"}
    latency, bandwidth : float
        Seconds a message, bytes a second.
    deviation : float
        By how much, at worst, a measured time differs from the model, as a share of the time.
    n_pairs : int
        Pairs that were measured.
    n_bytes : (k,) int64
        Sizes of messages.
    seconds : (k,) float64
        Median time of a message of each size.
    """

    where: str
    latency: float
    bandwidth: float
    deviation: float
    n_pairs: int
    n_bytes: Int64Array
    seconds: FloatArray

    def to_json_dict(self) -> dict[str, Any]:
        """Return the figures, ready for JSON."""
        return {
            "latency": self.latency,
            "bandwidth": self.bandwidth,
            "deviation": self.deviation,
            "pairs": self.n_pairs,
            "bytes": self.n_bytes.tolist(),
            "seconds": self.seconds.tolist(),
        }


@dataclass(frozen=True)
class NetworkFigures:
    """What `sfcpart.measure_network` found.

    Attributes
    ----------
    n_ranks, n_hosts : int
    fits : tuple of MessageFit
        On a node, across nodes, or both: as the ranks lie.
    """

    n_ranks: int
    n_hosts: int
    fits: tuple[MessageFit, ...]

    def to_json_dict(self) -> dict[str, Any]:
        """Return the figures, ready for JSON.

        Examples
        --------
        >>> NetworkFigures(2, 1, ()).to_json_dict()["ranks"]
        2
        """
        return {
            "model": "seconds of a message = latency + bytes / bandwidth",
            "ranks": self.n_ranks,
            "hosts": self.n_hosts,
            "networks": {fit.where: fit.to_json_dict() for fit in self.fits},
        }


def fit_messages(n_bytes: Array, seconds: Array) -> tuple[float, float, float]:
    """Fit latency and bandwidth to times of messages.

    Parameters
    ----------
    n_bytes, seconds : (k,) numbers
        At least two sizes, times above 0.

    Returns
    -------
    latency, bandwidth : float
        With the least sum of squared relative deviations, neither below 0. Where times do not grow
        with the size, the bandwidth is that of the largest message.
    deviation : float
        The largest relative deviation.

    Raises
    ------
    InputError
        If there are fewer than two sizes, or a time is not above 0.

    Examples
    --------
    >>> latency, bandwidth, deviation = fit_messages([8, 1e6], [1.008e-6, 1.01e-4])
    >>> f"{latency:.3g} s, {bandwidth:.3g} bytes/s"
    '1.01e-06 s, 1e+10 bytes/s'
    """
    size, took = np.asarray(n_bytes, np.float64), np.asarray(seconds, np.float64)
    if len(np.unique(size)) < 2 or not np.all(took > 0):
        raise InputError(
            f"{len(np.unique(size))} sizes of messages, least time {took.min(initial=1):g} s; "
            "wanted two sizes or more and times above 0"
        )
    terms = np.stack([1 / took, size / took], axis=1)
    latency, slope = np.linalg.lstsq(terms, np.ones(len(took)), rcond=None)[0].tolist()
    if latency < 0:  # the best with latency 0
        latency, slope = 0.0, float(terms[:, 1].sum() / np.square(terms[:, 1]).sum())
    if slope <= 0:
        slope = float(took[np.argmax(size)] / size.max())
        latency = float((terms[:, 0] * (1 - terms[:, 1] * slope)).sum())
        latency = max(0.0, latency / float(np.square(terms[:, 0]).sum()))
    deviation = np.abs(latency + slope * size - took) / took
    return float(latency), 1 / float(slope), float(deviation.max())


class _Pair(NamedTuple):
    """Two ranks that hand messages to and fro, and how they lie."""

    where: str
    first: int
    second: int


def measure_messages(
    comm: Comm,
    *,
    largest: int = 1 << 22,
    host: str | None = None,
    clock: Callable[[], float] = time.perf_counter,
) -> NetworkFigures:
    """Measure messages between ranks; all ranks together.

    Parameters
    ----------
    comm : Comm
    largest : int
        Bytes of the largest message, at least 64.
    host : str, optional
        Name of the node of this rank; by default what the system says.
    clock : callable
        Seconds.

    Returns
    -------
    NetworkFigures
        The same on all ranks.

    Raises
    ------
    InputError
        If there is one rank alone, or `largest` is too small.
    """
    if largest < 8 * SMALLEST:
        raise InputError(f"the largest message is {largest} bytes; wanted {8 * SMALLEST} or more")
    hosts = _hosts(comm, gethostname() if host is None else host)
    pairs = [*_spread(_on_node(hosts)), *_spread(_across(hosts))]
    if not pairs:
        raise InputError(
            "one rank has nobody to send messages to; start at least two: "
            "mpiexec -n 2 sfcpart network"
        )
    sizes = np.array(list(_sizes(largest)), np.int64)
    seconds = np.zeros((len(pairs), len(sizes)))
    for p, pair in enumerate(pairs):
        for s, n_bytes in enumerate(sizes.tolist()):
            seconds[p, s] = _message_seconds(comm, pair, n_bytes, clock)
    seconds = comm.allreduce(seconds, "max")  # only the first rank of a pair has a time
    fits = [
        _fit(where, sizes, seconds[[pair.where == where for pair in pairs]])
        for where in dict.fromkeys(pair.where for pair in pairs)
    ]
    return NetworkFigures(comm.size, len(set(hosts)), tuple(fits))


def _fit(where: str, sizes: Int64Array, seconds: FloatArray) -> MessageFit:
    """Take the median over pairs and fit the model."""
    median = np.median(seconds, axis=0)
    latency, bandwidth, deviation = fit_messages(sizes, median)
    return MessageFit(where, latency, bandwidth, deviation, len(seconds), sizes, median)


def _hosts(comm: Comm, host: str) -> list[str]:
    """Return the name of every rank's node."""
    names = comm.allgather(np.frombuffer(host.encode() or b"?", np.uint8))
    return [name.tobytes().decode() for name in names]


def _on_node(hosts: Sequence[str]) -> list[_Pair]:
    """Pair each rank with the next one of its node."""
    pairs, last = [], dict[str, int]()
    for rank, host in enumerate(hosts):
        if host in last:
            pairs.append(_Pair("on-node", last[host], rank))
        last[host] = rank
    return pairs


def _across(hosts: Sequence[str]) -> list[_Pair]:
    """Pair the first rank of each node with that of the next."""
    first = [hosts.index(host) for host in dict.fromkeys(hosts)]
    return [_Pair("across-nodes", a, b) for a, b in pairwise(first)]


def _spread(pairs: list[_Pair]) -> list[_Pair]:
    """Keep a few pairs, spread over all."""
    return pairs[:: max(1, -(-len(pairs) // MOST_PAIRS))]


def _sizes(largest: int) -> Iterator[int]:
    """Yield sizes of messages, each a few times the one before."""
    size = SMALLEST
    while size < largest:
        yield size
        size *= GROWTH
    yield largest


def _message_seconds(comm: Comm, pair: _Pair, n_bytes: int, clock: Callable[[], float]) -> float:
    """Return the median time of a message on the first rank of a pair, 0 on all others."""
    there = _link(comm, pair.first, pair.second, n_bytes)
    back = _link(comm, pair.second, pair.first, n_bytes)
    trips = max(1, min(MOST_TRIPS, BYTES_A_SAMPLE // n_bytes))
    samples = []
    for sample in range(-1, SAMPLES):  # the first one warms up
        comm.barrier()
        began = clock()
        for _ in range(trips):
            there.start()
            there.finish()
            back.start()
            back.finish()
        if sample >= 0:
            samples.append((clock() - began) / (2 * trips))
    return float(np.median(samples)) if comm.rank == pair.first else 0.0


def _link(comm: Comm, source: int, target: int, n_bytes: int) -> Link:
    """Set up a message from one rank to another; the others have no part in it."""
    targets = [(target, 0, n_bytes)] if comm.rank == source else []
    sources = [(source, 0, n_bytes)] if comm.rank == target else []
    sent, received = np.zeros(n_bytes, np.uint8), np.zeros(n_bytes, np.uint8)
    return comm.link(sent, received, targets=targets, sources=sources)
