"""The stable order of keys against numpy's."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.kernels import threads
from sfcpart.kernels.curve import radix
from sfcpart.kernels.curve.radix import put_rows, sorting, stable_order, survey, take_rows


def assert_same_order(key: np.ndarray) -> None:
    given_key = key.copy()
    order, sorted_key = stable_order(key)
    np.testing.assert_array_equal(order, np.argsort(key, kind="stable"))
    np.testing.assert_array_equal(sorted_key, key[order])
    np.testing.assert_array_equal(key, given_key)


@given(st.lists(st.integers(0, 2**63 - 1), max_size=60))
def test_any_keys(keys):
    assert_same_order(np.array(keys, np.int64))


KEYS = {
    "random": lambda rng, n: rng.integers(0, 2**63 - 1, n),
    "few distinct": lambda rng, n: rng.integers(0, 5, n),
    "all equal": lambda rng, n: np.full(n, 7),
    "ascending": lambda rng, n: np.sort(rng.integers(0, 2**62, n)),
    "descending": lambda rng, n: -np.sort(-rng.integers(0, 2**62, n)),
    "clustered": lambda rng, n: np.exp(rng.uniform(0, 40, n)).astype(np.int64),
    "one far away": lambda rng, n: np.append(rng.integers(0, 9999, n - 1), 2**62),
    "in order but for one": lambda rng, n: np.append(np.arange(n - 1), n // 2),
}


@pytest.mark.parametrize("kind", KEYS)
@pytest.mark.parametrize("n", [1, 2, 25, 3000])
def test_kinds_of_keys(kind, n):
    assert_same_order(KEYS[kind](np.random.default_rng(n), n).astype(np.int64))


@pytest.mark.parametrize("kind", KEYS)
@pytest.mark.parametrize("count", [1, 2, 3, 5])
def test_threads_do_not_matter(kind, count, monkeypatch):
    # Buckets that many keys share are scattered again: let this happen at small sizes too.
    monkeypatch.setattr(radix, "_LARGE", 100)
    monkeypatch.setenv("SFCPART_THREADS", str(count))
    monkeypatch.setattr(threads.ranges, "__kwdefaults__", {"smallest": 64})
    monkeypatch.setattr(threads.run_ranges, "__kwdefaults__", {"smallest": 64})
    assert_same_order(KEYS[kind](np.random.default_rng(0), 5000).astype(np.int64))


def test_survey_counts_equal_neighbours():
    assert survey(np.array([3, 3, 1, 1, 1])) == (1, 3, False, 3)
    assert survey(np.array([0, 4, 4])) == (0, 4, True, 1)
    assert survey(np.empty(0, np.int64)).in_order


def test_keys_in_order_are_handed_back():
    key = np.arange(5)
    order, same = sorting(key)
    assert order is None
    assert same is key


def test_take_and_put_are_inverse():
    rows = np.random.default_rng(0).permutation(1000)
    values = np.arange(1000.0)
    np.testing.assert_array_equal(take_rows(values, rows), values[rows])
    np.testing.assert_array_equal(put_rows(take_rows(values, rows), rows), values)
