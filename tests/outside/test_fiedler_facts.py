"""Fiedler vectors in closed form, and scipy's eigen-solver as a referee.

Sources: M. Fiedler, Algebraic connectivity of graphs, Czech. Math. J. 23:298 (1973), and B. Mohar,
The Laplacian spectrum of graphs (1991), both from memory: paths 2 - 2 cos(pi / n) with the vector
cos(pi (i + 1/2) / n); cycles 2 - 2 cos(2 pi / n); complete graphs n; stars 1; products of graphs
add their eigenvalues, so a grid has that of its longer side.
"""

from __future__ import annotations

import networkx as nx
import numpy as np
import pytest
from scipy.sparse import csr_array
from scipy.sparse.csgraph import laplacian
from scipy.sparse.linalg import eigsh

from sfcpart.methods.bisection.fiedler import fiedler_vector, spectral_line
from sfcpart.methods.graph.coarsen import WeightedGraph


def weighted(graph: nx.Graph) -> WeightedGraph:
    matrix = csr_array(nx.to_scipy_sparse_array(graph, format="csr", dtype=np.int64))
    matrix.sort_indices()
    return WeightedGraph(
        matrix.indptr.astype(np.int64), matrix.indices.astype(np.int32), matrix.data,
        np.ones(matrix.shape[0], np.int64),
    )  # fmt: skip


@pytest.mark.parametrize("n", [2, 3, 10, 48, 49, 100, 1000])
def test_paths(n):
    value, vector = fiedler_vector(weighted(nx.path_graph(n)), accuracy=1e-7)
    wanted = -np.cos(np.pi * (np.arange(n) + 0.5) / n)
    wanted /= np.linalg.norm(wanted)
    assert value == pytest.approx(2 - 2 * np.cos(np.pi / n), rel=1e-9)
    assert np.abs(vector) == pytest.approx(np.abs(wanted), abs=1e-6)
    assert abs(vector @ wanted) == pytest.approx(1, abs=1e-10)


@pytest.mark.parametrize("shape", [(3, 2), (20, 10), (40, 39), (65, 33)])
def test_grids(shape):
    grid = nx.convert_node_labels_to_integers(nx.grid_2d_graph(*shape))
    value, vector = fiedler_vector(weighted(grid), accuracy=1e-7)
    assert value == pytest.approx(2 - 2 * np.cos(np.pi / shape[0]), rel=1e-8)
    across = vector.reshape(shape)
    assert np.ptp(across, axis=1).max() < 1e-5  # alike along the shorter side
    column = np.cos(np.pi * (np.arange(shape[0]) + 0.5) / shape[0])
    column /= np.linalg.norm(column) * np.sqrt(shape[1])
    assert np.abs(across[:, 0]) == pytest.approx(np.abs(column), abs=1e-6)


@pytest.mark.parametrize(
    ("graph", "wanted"),
    [
        (nx.complete_graph(2), 2),
        (nx.complete_graph(30), 30),
        (nx.complete_graph(80), 80),
        (nx.star_graph(20), 1),
        (nx.star_graph(300), 1),
        (nx.cycle_graph(150), 2 - 2 * np.cos(2 * np.pi / 150)),
        (nx.hypercube_graph(7), 2),
    ],
)
def test_multiple_eigenvalues(graph, wanted):
    value, vector = fiedler_vector(
        weighted(nx.convert_node_labels_to_integers(graph)), accuracy=1e-6
    )
    assert value == pytest.approx(wanted, rel=1e-6)
    assert abs(vector.sum()) < 1e-9
    assert np.linalg.norm(vector) == pytest.approx(1)


@pytest.mark.parametrize("seed", [0, 1, 2])
def test_random_weighted_graphs_against_scipy(seed):
    graph = nx.connected_watts_strogatz_graph(700, 4, 0.05, seed=seed)
    rng = np.random.default_rng(seed)
    for _, _, data in graph.edges(data=True):
        data["weight"] = int(rng.integers(1, 9))
    mine = weighted(graph)
    value, vector = fiedler_vector(mine, accuracy=1e-6, steps=500)
    matrix = csr_array((mine.edge_weight * 1.0, mine.indices, mine.indptr), shape=(700, 700))
    values, vectors = eigsh(laplacian(matrix).tocsc(), k=2, sigma=-1e-3, v0=np.ones(700))
    assert value == pytest.approx(values[1], rel=1e-8)
    assert abs(vector @ vectors[:, 1]) == pytest.approx(1, abs=1e-6)


def test_the_quotient_never_falls_below_the_eigenvalue():
    for accuracy in (1.0, 0.1, 1e-2):
        value, _ = fiedler_vector(weighted(nx.path_graph(3000)), accuracy=accuracy)
        assert value >= (2 - 2 * np.cos(np.pi / 3000)) * (1 - 1e-9)


def test_components_lie_in_a_row():
    graph = nx.disjoint_union_all([nx.path_graph(4), nx.empty_graph(2), nx.path_graph(6)])
    value = spectral_line(weighted(graph), np.arange(12), 0.75)
    assert value[:6].tolist() == [0, 0, 0, 0, 1, 2]  # not cut: their inside does not matter
    assert value[6:].tolist() in ([3, 4, 5, 6, 7, 8], [8, 7, 6, 5, 4, 3])
