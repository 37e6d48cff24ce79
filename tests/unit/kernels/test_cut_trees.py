"""Maximum flows by two trees, against scipy's (a general-purpose library)."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.sparse import csr_array
from scipy.sparse.csgraph import maximum_flow

from sfcpart.dtypes import Array
from sfcpart.kernels.graph.cut_trees import FREE, N_COLUMNS, SINK, SOURCE, TREE, push_flow


def network(seed: int, n: int, n_edges: int, most: int) -> dict[str, Array]:
    """Make an undirected network with random capacities inside, and from and to outside."""
    rng = np.random.default_rng(seed)
    ends = np.unique(np.sort(rng.integers(0, n, (n_edges, 2)), axis=1), axis=0)
    ends = ends[ends[:, 0] != ends[:, 1]]
    tail, head = np.concatenate([ends[:, 0], ends[:, 1]]), np.concatenate([ends[:, 1], ends[:, 0]])
    weight = np.tile(rng.integers(1, most + 1, len(ends)), 2)
    twin = np.roll(np.arange(len(tail)), len(ends))
    order = np.argsort(tail, kind="stable")
    place = np.empty(len(order), np.int64)
    place[order] = np.arange(len(order))
    ptr = np.concatenate([[0], np.cumsum(np.bincount(tail, minlength=n))]).astype(np.int64)
    outside = rng.integers(-2, 3, n)
    return {
        "ptr": ptr[:-1].copy(),
        "stop": ptr[1:].copy(),
        "arc": np.stack([head[order], place[twin[order]]], axis=1).astype(np.int32),
        "left": weight[order].astype(np.int64),
        "source": (np.maximum(outside, 0) * most).astype(np.int64),
        "sink": (np.maximum(-outside, 0) * most + (rng.random(n) < 0.1)).astype(np.int64),
    }


def flow(net: dict[str, Array], patience: int) -> tuple[int, Array]:
    """Push a flow through a copy of a network; return its value and the trees."""
    n = len(net["ptr"])
    copy = {name: values.copy() for name, values in net.items()}
    node = np.empty((n, N_COLUMNS), np.int32)
    queues = np.empty((2, n), np.int32)
    return push_flow(n, *copy.values(), node, queues[0], queues[1], patience), node[:, TREE]


def by_scipy(net: dict[str, Array]) -> int:
    """Return the value of a maximum flow."""
    n = len(net["ptr"])
    row = np.repeat(np.arange(n), net["stop"] - net["ptr"])
    rows = np.concatenate([row, np.full(n, n), np.arange(n)])
    columns = np.concatenate([net["arc"][:, 0], np.arange(n), np.full(n, n + 1)])
    data = np.concatenate([net["left"], net["source"], net["sink"]]).astype(np.int32)
    graph = csr_array((data, (rows, columns)), shape=(n + 2, n + 2))
    graph.eliminate_zeros()
    return int(maximum_flow(graph, n, n + 1).flow_value)


@pytest.mark.parametrize("seed", range(12))
def test_value_and_least_cuts(seed: int) -> None:
    net = network(seed, n=8 + 6 * seed, n_edges=20 + 25 * seed, most=1 if seed % 2 else 9)
    value, tree = flow(net, 10**6)
    assert value == by_scipy(net)
    row = np.repeat(np.arange(len(tree)), net["stop"] - net["ptr"])
    for inside in (tree == SOURCE, tree != SINK):  # either border cuts what flows
        inner = inside[row] & ~inside[net["arc"][:, 0]]
        cut = net["left"][inner].sum() + net["source"][~inside].sum() + net["sink"][inside].sum()
        assert cut == value
    assert np.all(np.isin(tree, [FREE, SOURCE, SINK]))


def test_gives_up_in_time() -> None:
    net = network(3, n=40, n_edges=150, most=9)
    assert flow(net, 10**6)[0] > 0
    assert flow(net, 1)[0] == -1
