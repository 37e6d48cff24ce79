"""Ranges of rows: every row once, in order, whatever the number of threads."""

from __future__ import annotations

import os
import threading
import warnings

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.kernels.curve.hilbert import bounds_range
from sfcpart.kernels.threads import n_threads, ranges, run_ranges


@pytest.mark.parametrize("n", ["1", "2", "7"])
@given(n_rows=st.integers(0, 200), smallest=st.integers(1, 50))
def test_ranges_cover_the_rows_once(n, n_rows, smallest):
    before = os.environ.get("SFCPART_THREADS")
    os.environ["SFCPART_THREADS"] = n
    try:
        pieces = ranges(n_rows, smallest=smallest)
    finally:
        os.environ.pop("SFCPART_THREADS")
        if before is not None:
            os.environ["SFCPART_THREADS"] = before
    assert [row for lo, hi in pieces for row in range(lo, hi)] == list(range(n_rows))
    assert 1 <= len(pieces) <= int(n)
    assert len(pieces) == 1 or min(hi - lo for lo, hi in pieces) >= smallest


@pytest.mark.parametrize("asked", ["0", "-2", "many", ""])
def test_a_senseless_number_of_threads_means_all_processors(asked, monkeypatch):
    monkeypatch.setenv("SFCPART_THREADS", asked)
    assert n_threads() >= 1


def test_results_come_in_the_order_of_the_rows(monkeypatch):
    monkeypatch.setenv("SFCPART_THREADS", "4")
    target = np.zeros(100, np.int64)

    def kernel(start, stop, factor):
        target[start:stop] = np.arange(start, stop) * factor
        return start, stop, threading.current_thread() is threading.main_thread()

    results = run_ranges(kernel, 100, 3, smallest=10)
    assert [result[:2] for result in results] == [(0, 25), (25, 50), (50, 75), (75, 100)]
    assert not any(result[2] for result in results)
    np.testing.assert_array_equal(target, np.arange(100) * 3)


def test_one_range_stays_in_the_calling_thread(monkeypatch):
    monkeypatch.setenv("SFCPART_THREADS", "4")
    called = run_ranges(lambda lo, hi: (lo, hi, threading.get_ident()), 9, smallest=10)
    assert called == [(0, 9, threading.get_ident())]


def test_an_error_in_a_range_reaches_the_caller(monkeypatch):
    monkeypatch.setenv("SFCPART_THREADS", "2")

    def kernel(start, stop):
        if start > 0:
            raise ZeroDivisionError("in the second range")

    with pytest.raises(ZeroDivisionError, match="second range"):
        run_ranges(kernel, 20, smallest=10)


@pytest.mark.parametrize("n", [3, 100_000])
def test_infinities_in_a_kernel_are_not_talked_about(n):
    # Compiled kernels never warn; plain Python ones would, and warnings are errors here.
    array = np.full((n, 2), np.inf)
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        bounds = run_ranges(bounds_range, n, array)
    assert np.isnan(bounds).all()
