"""Time and memory of a call: what counts, and what the numbers mean."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from sfcpart import meter
from sfcpart.meter import metered

MB = 1 << 20


def test_memory_is_about_what_a_call_allocates():
    held, took = metered(lambda: np.ones(64 * MB, np.uint8))
    if took.peak_bytes is None:
        pytest.skip("this system does not tell")
    assert held.sum() == 64 * MB
    assert 0.98 * 64 * MB <= took.peak_bytes <= 1.1 * 64 * MB


def test_memory_that_is_given_back_inside_a_call_counts():
    total, took = metered(lambda: int(np.ones(48 * MB, np.uint8).sum()))
    if took.peak_bytes is None:
        pytest.skip("this system does not tell")
    assert total == 48 * MB
    assert took.peak_bytes >= 0.98 * 48 * MB


FREED_EARLIER = """
import numpy as np
from sfcpart.meter import metered
MB = 1 << 20
pieces = [np.ones(MB // 16, np.uint8) for _ in range(256)]  # small enough for the heap
pin = np.ones(MB // 16, np.uint8)  # above them, so that the heap keeps what is freed
del pieces
held, took = metered(lambda: [np.ones(MB // 16, np.uint8) for _ in range(256)])
print(took.peak_bytes)
"""


def test_memory_freed_earlier_does_not_hide_what_a_call_takes():
    # in a process of its own: what the heap can give back depends on all that ran before
    done = subprocess.run(
        [sys.executable, "-c", FREED_EARLIER], capture_output=True, text=True, check=True
    )
    if done.stdout.strip() == "None":
        pytest.skip("this system does not tell")
    assert 0.9 * 16 * MB <= int(done.stdout) <= 1.3 * 16 * MB


def test_without_proc_there_is_no_memory_but_a_time(monkeypatch):
    monkeypatch.setattr(meter, "_RESET", Path("/nowhere/clear_refs"))
    result, took = metered(lambda: 7)
    assert (result, took.peak_bytes) == (7, None)
    assert took.seconds >= 0


def test_without_that_c_library_memory_is_not_given_back_but_measured(monkeypatch):
    def nothing(_name):
        raise OSError("no such library")

    monkeypatch.setattr(meter.ctypes, "CDLL", nothing)
    result, took = metered(lambda: 1)
    assert result == 1
    assert took.peak_bytes is None or took.peak_bytes >= 0


@pytest.fixture
def clock(monkeypatch):
    """Replace the clock by one that a call moves: no test waits or measures real time."""
    now = [0.0]
    monkeypatch.setattr(meter.time, "perf_counter", lambda: now[0])
    return now


def _taking(clock, *seconds):
    """Return a call that takes these times in turn, and the times that are left."""
    left = list(seconds)

    def call() -> None:
        clock[0] += left.pop(0)

    return call, left


def test_a_run_that_compiles_does_not_count(monkeypatch, clock):
    call, left = _taking(clock, 8.0, 1.0, 2.0)
    monkeypatch.setattr(meter, "count_compiled", lambda: len(left) < 3)
    assert metered(call)[1].seconds == 1.0
    assert metered(call)[1].seconds == 2.0  # nothing new: measured once
    assert left == []


def test_medians_of_repeated_runs(clock):
    call, left = _taking(clock, 4.0, 1.0, 2.0)
    assert metered(call, repeat=3)[1].seconds == 2.0
    assert left == []
