"""Partitions of graphs against exact optima, published widths and general-purpose referees."""

from __future__ import annotations

import itertools

import networkx
import numpy as np
import pytest
from scipy.optimize import Bounds, LinearConstraint, milp
from scipy.sparse import coo_array, csr_array, lil_array

from sfcpart.methods.graph.multilevel import split_graph


def cut(matrix, part) -> int:
    entry = matrix.tocoo()
    row, column = entry.coords
    return int(entry.data[part[row] != part[column]].sum()) // 2


def grid(*shape: int) -> csr_array:
    return csr_array(networkx.to_scipy_sparse_array(networkx.grid_graph(shape), dtype=np.int64))


def least_bisection(matrix) -> int:
    """Solve the two-way split at perfect balance exactly (scipy.optimize.milp, HiGHS)."""
    entry = matrix.tocoo()
    pairs = [(i, j, w) for i, j, w in zip(*entry.coords, entry.data, strict=True) if i < j]
    n, m = matrix.shape[0], len(pairs)
    rule = lil_array((2 * m + 1, n + m))
    for e, (i, j, _) in enumerate(pairs):
        for row, sign in ((2 * e, 1), (2 * e + 1, -1)):  # |x_i - x_j| <= y_e
            rule[row, i], rule[row, j], rule[row, n + e] = sign, -sign, -1
    rule[2 * m, :n] = 1
    low, high = np.full(2 * m + 1, -np.inf), np.zeros(2 * m + 1)
    low[-1], high[-1] = n // 2, (n + 1) // 2
    cost = np.concatenate([np.zeros(n), [w for _, _, w in pairs]])
    answer = milp(
        cost,
        constraints=LinearConstraint(rule.tocsr(), low, high),
        integrality=np.ones(n + m),
        bounds=Bounds(0, 1),
    )
    assert answer.success
    return round(answer.fun)


@pytest.mark.parametrize("seed", range(6))
def test_tiny_graphs_are_split_as_milp_does(seed):
    rng = np.random.default_rng(seed)
    graph = networkx.random_regular_graph(3, 14, seed=seed)
    for edge in graph.edges:
        graph.edges[edge]["weight"] = int(rng.integers(1, 5))
    matrix = csr_array(networkx.to_scipy_sparse_array(graph, dtype=np.int64))
    part = split_graph(matrix, 2, tolerance=0.0)
    assert np.bincount(part).tolist() == [7, 7]
    assert cut(matrix, part) == least_bisection(matrix)


@pytest.mark.parametrize("seed", range(3))
def test_no_worse_than_kernighan_lin_of_networkx(seed):
    graph = networkx.connected_watts_strogatz_graph(60, 4, 0.1, seed=seed)
    matrix = csr_array(networkx.to_scipy_sparse_array(graph, dtype=np.int64))
    one, two = networkx.community.kernighan_lin_bisection(graph, seed=seed)
    part = split_graph(matrix, 2, tolerance=0.0)
    ours = [set(np.flatnonzero(part == p).tolist()) for p in (0, 1)]
    assert networkx.cut_size(graph, *ours) == cut(matrix, part)
    assert cut(matrix, part) <= networkx.cut_size(graph, one, two)


@pytest.mark.parametrize("n", [8, 9, 15])
def test_bisection_width_of_square_grids(n):
    # Published: N for even N, (N^2 - 1)/(N - 1) = N + 1 for odd N.
    part = split_graph(grid(n, n), 2, tolerance=0.0)
    assert cut(grid(n, n), part) == (n if n % 2 == 0 else n + 1)


@pytest.mark.parametrize(("n", "n_parts"), [(8, 4), (10, 4), (8, 16)])
def test_squares_of_a_grid_at_perfect_balance(n, n_parts):
    # n^2/p unit squares have perimeter >= 4 n/sqrt(p) (Harary, Harborth 1976): p squares are best.
    part = split_graph(grid(n, n), n_parts, tolerance=0.0)
    assert np.bincount(part).max() == n * n // n_parts
    assert cut(grid(n, n), part) == 2 * n * (int(n_parts**0.5) - 1)


def test_eight_cubes_of_a_cube():
    # Least surface of 27 unit cubes is that of the 3^3 cube (Alonso, Cerf 1996).
    part = split_graph(grid(6, 6, 6), 8, tolerance=0.03)
    assert 3 * 6 * 6 <= cut(grid(6, 6, 6), part) <= 1.03 * 3 * 6 * 6


def octahedron(n: int) -> csr_array:
    """Closed triangulated octahedron: |x| + |y| + |z| = n, unit exchanges in a closed octant."""
    points = [
        (x, y, z)
        for x, y, z in itertools.product(range(-n, n + 1), repeat=3)
        if abs(x) + abs(y) + abs(z) == n
    ]
    number = {p: i for i, p in enumerate(points)}
    steps = [s for s in itertools.product((-1, 0, 1), repeat=3) if np.abs(s).sum() == 2]
    pairs = []
    for p, i in number.items():
        for s in steps:
            q = tuple(a + b for a, b in zip(p, s, strict=True))
            if q in number and all(a * b >= 0 for a, b in zip(p, q, strict=True)):
                pairs.append((i, number[q]))
    row, column = np.array(pairs).T
    ones = np.ones(len(pairs), np.int64)
    return csr_array(coo_array((ones, (row, column)), shape=(len(points), len(points))))


def test_two_halves_of_the_octahedral_sphere():
    # 4 n^2 + 2 vertices, 12 n^2 edges; the equator cuts 6n at imbalance 3n/(4n^2 + 2), and 6n + 2
    # at perfect balance (computed).
    n = 6
    matrix = octahedron(n)
    assert matrix.shape[0] == 4 * n * n + 2
    assert matrix.nnz == 24 * n * n
    loose = 3 * n / (4 * n * n + 2)
    assert cut(matrix, split_graph(matrix, 2, tolerance=loose + 1e-9)) <= 6 * n
    part = split_graph(matrix, 2, tolerance=0.0)
    assert np.bincount(part).tolist() == [73, 73]
    assert cut(matrix, part) <= 6 * n + 2
