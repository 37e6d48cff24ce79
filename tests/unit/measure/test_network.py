"""The message model fitted to times, and the ping-pong on ranks that are threads."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import InputError
from sfcpart.measure.network import fit_messages, measure_messages

SIZES = np.array([8, 64, 512, 4096, 1 << 15, 1 << 20])


def test_exact_times_give_their_numbers_back():
    latency, bandwidth, deviation = fit_messages(SIZES, 2e-6 + SIZES / 5e9)
    assert (latency, bandwidth) == (pytest.approx(2e-6), pytest.approx(5e9))
    assert deviation < 1e-9


def test_the_fit_is_the_least_squares_one_of_relative_deviations():
    # against numpy's general least squares over a grid of small changes: none is better
    took = (2e-6 + SIZES / 5e9) * np.array([1.1, 0.9, 1.0, 1.2, 0.8, 1.05])
    latency, bandwidth, deviation = fit_messages(SIZES, took)

    def squares(t0, rate):
        return float(np.square((t0 + SIZES / rate) / took - 1).sum())

    best = squares(latency, bandwidth)
    for more in (0.99, 1.01):
        assert squares(latency * more, bandwidth) > best
        assert squares(latency, bandwidth * more) > best
    assert deviation == pytest.approx(np.abs((latency + SIZES / bandwidth) / took - 1).max())


def test_neither_number_falls_below_zero():
    latency, bandwidth, _ = fit_messages([8, 1000], [1e-9, 1e-6])  # faster than in proportion
    assert latency == 0
    assert bandwidth > 0
    latency, bandwidth, _ = fit_messages([8, 1000], [2e-6, 1e-6])  # the larger is the faster
    assert latency >= 0
    assert bandwidth == pytest.approx(1e9)


@pytest.mark.parametrize(("sizes", "took"), [([8, 8], [1, 1]), ([8, 9], [0, 1]), ([], [])])
def test_what_fixes_no_line_is_refused(sizes, took):
    with pytest.raises(InputError, match="wanted two sizes or more and times above 0"):
        fit_messages(sizes, took)


class Clock:
    """A clock that goes on by a second whenever it is asked."""

    def __init__(self) -> None:
        self.now = 0.0

    def __call__(self) -> float:
        self.now += 1.0
        return self.now


@pytest.mark.parametrize(
    ("hosts", "wanted"),
    [
        ("aa", {"on-node": 1}),
        ("ab", {"across-nodes": 1}),
        ("aabbc", {"on-node": 2, "across-nodes": 2}),
        ("abab", {"on-node": 2, "across-nodes": 1}),
        ("aaaaaaa", {"on-node": 3}),  # six pairs, every second of them
    ],
)
def test_pairs_on_a_node_and_across_are_told_apart(hosts, wanted):
    def act(comm):
        return measure_messages(comm, largest=64, host=hosts[comm.rank], clock=Clock())

    seen = [figures.to_json_dict() for figures in run_ranks(len(hosts), act)]
    assert seen == [seen[0]] * len(hosts)
    assert {name: row["pairs"] for name, row in seen[0]["networks"].items()} == wanted
    assert (seen[0]["ranks"], seen[0]["hosts"]) == (len(hosts), len(set(hosts)))
    for row in seen[0]["networks"].values():
        assert row["bytes"] == [8, 32, 64]
        assert row["seconds"] == [1 / 200] * 3  # one tick for 100 trips there and back


def test_one_rank_and_small_messages_are_refused():
    with pytest.raises(InputError, match="mpiexec -n 2 sfcpart network"):
        measure_messages(SerialComm())
    with pytest.raises(InputError, match="largest message is 63 bytes; wanted 64 or more"):
        run_ranks(2, lambda comm: measure_messages(comm, largest=63))
