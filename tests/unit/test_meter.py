"""Time and memory of a call: what counts, and what the numbers mean."""

from __future__ import annotations

import time
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


def test_memory_freed_earlier_does_not_hide_what_a_call_takes():
    for _ in range(3):  # small enough for the heap, which keeps what is freed
        pieces = [np.ones(MB // 16, np.uint8) for _ in range(256)]
        del pieces
    _, took = metered(lambda: [np.ones(MB // 16, np.uint8) for _ in range(256)])
    if took.peak_bytes is None:
        pytest.skip("this system does not tell")
    assert 0.9 * 16 * MB <= took.peak_bytes <= 1.3 * 16 * MB


def test_without_proc_there_is_no_memory_but_a_time(monkeypatch):
    monkeypatch.setattr(meter, "_RESET", Path("/nowhere/clear_refs"))
    result, took = metered(lambda: time.sleep(0.01))
    assert (result, took.peak_bytes) == (None, None)
    assert took.seconds >= 0.01


def test_without_that_c_library_memory_is_not_given_back_but_measured(monkeypatch):
    def nothing(_name):
        raise OSError("no such library")

    monkeypatch.setattr(meter.ctypes, "CDLL", nothing)
    result, took = metered(lambda: 1)
    assert result == 1
    assert took.peak_bytes is None or took.peak_bytes >= 0


def test_a_run_that_compiles_does_not_count(monkeypatch):
    compiled = [0]
    naps = iter([0.3, 0.0, 0.0])

    def call() -> None:
        time.sleep(next(naps))
        compiled[0] = 1

    monkeypatch.setattr(meter, "count_compiled", lambda: compiled[0])
    assert metered(call)[1].seconds < 0.3
    assert metered(call)[1].seconds < 0.3  # nothing new: measured once
    assert list(naps) == []


def test_medians_of_repeated_runs():
    naps = iter([0.2, 0.0, 0.1])
    _, took = metered(lambda: time.sleep(next(naps)), repeat=3)
    assert 0.1 <= took.seconds < 0.2
    assert list(naps) == []
