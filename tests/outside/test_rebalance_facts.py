"""Moving cells against facts and libraries from outside the project.

- moved weight >= sum of max(0, W_i - (1 + eps) W / P): elementary;
- the least migration by linear programming: `scipy.optimize.linprog` (HiGHS);
- names of new parts: `scipy.optimize.linear_sum_assignment` on the full table, and all
  permutations of up to seven parts (the assignment problem of L. Oliker, R. Biswas, JPDC 1998).
"""

from __future__ import annotations

from itertools import permutations

import numpy as np
import pytest
from scipy.optimize import linear_sum_assignment, linprog

from sfcpart.resplit.caps import part_caps
from sfcpart.resplit.migration import Migration, least_moved
from sfcpart.resplit.overlap import Overlap
from sfcpart.resplit.relabel import best_labels


def least_by_programme(home: np.ndarray, most: np.ndarray) -> float:
    """Return the least weight that moves so that no part holds more than it may."""
    n = max(len(home), len(most))
    held, may = np.zeros(n), np.zeros(n)
    held[: len(home)], may[: len(most)] = home, most
    leave = np.kron(np.eye(n), np.ones(n))  # x[p, q] moves from p to q
    come = np.kron(np.ones(n), np.eye(n))
    away = 1.0 - np.eye(n).reshape(-1)
    keeps = np.vstack([(come - leave) * away, leave * away])
    found = linprog(away, A_ub=keeps, b_ub=np.concatenate([may - held, held]))
    assert found.success
    return float(found.fun)


@pytest.mark.parametrize("seed", range(8))
def test_the_bound_is_what_linear_programming_moves(seed):
    rng = np.random.default_rng(seed)
    n_old, n_new = rng.integers(2, 8, 2)
    home = rng.integers(0, 100, n_old)
    speed = rng.choice([1.0, 2.0], n_new)
    most = part_caps(int(home.sum()), speed, float(rng.choice([0.0, 0.1, 0.5])))
    assert least_moved(home, most) == pytest.approx(least_by_programme(home, most))


@pytest.mark.parametrize("seed", range(5))
def test_no_split_moves_less_than_the_excess(seed):
    rng = np.random.default_rng(seed)
    home, new = rng.integers(0, 5, (2, 200)).astype(np.int32)
    weight = rng.integers(1, 20, 200)
    most = part_caps(int(weight.sum()), np.ones(5), 0.03)
    moved = Migration.of(home, new, n_old_parts=5, n_parts=5, most=most, weight=weight)
    heaviest = np.maximum(np.bincount(new, weights=weight, minlength=5), most)
    excess = np.maximum(np.bincount(home, weights=weight, minlength=5) - heaviest, 0).sum()
    assert moved.least_weight == excess <= moved.moved_weight


def overlap_of(table: np.ndarray) -> Overlap:
    """Return an overlap with these weights."""
    old, new = (index.astype(np.int32) for index in np.nonzero(table))
    return Overlap(*table.shape, old, new, np.ones(len(old), np.int64), table[old, new])


@pytest.mark.parametrize("seed", range(5))
def test_names_keep_as_much_as_the_assignment_of_scipy(seed):
    rng = np.random.default_rng(seed)
    table = rng.integers(0, 10**12, (80, 80)) * (rng.random((80, 80)) < 0.06)
    label = best_labels(overlap_of(table))
    rows, columns = linear_sum_assignment(table, maximize=True)
    kept = table[label, np.arange(80)].sum()
    assert kept == pytest.approx(table[rows, columns].sum(), rel=1e-9)  # compared to 40 bits


def test_names_of_seven_parts_against_all_permutations():
    rng = np.random.default_rng(7)
    table = rng.integers(0, 50, (7, 7)) * (rng.random((7, 7)) < 0.5)
    every = np.array(list(permutations(range(7))))
    stays = table[every, np.arange(7)]
    total = best_labels(overlap_of(table))
    assert table[total, np.arange(7)].sum() == stays.sum(axis=1).max()
    load = np.maximum(table.sum(axis=1)[every], table.sum(axis=0))
    busiest = best_labels(overlap_of(table), keep="busiest")
    worst = np.maximum(table.sum(axis=1)[busiest], table.sum(axis=0)) - table[busiest, np.arange(7)]
    assert worst.max() == (load - stays).max(axis=1).min()
