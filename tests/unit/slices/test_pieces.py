"""Pieces and linked numbers over slices against scipy's connected components."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.sparse import coo_array
from scipy.sparse.csgraph import connected_components

from sfcpart.comm import run_ranks
from sfcpart.graph import cell_graph, components
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.graph_slice import graph_slice
from sfcpart.slices.linking import lowest_of_pairs
from sfcpart.slices.pieces import find_pieces, number_pieces
from tests.sliced import all_bounds, bounds, on_slices
from tests.strategies import grid


def lowest_by_scipy(n, pairs):
    """Return the lowest number of each component (scipy.sparse.csgraph, a reference library)."""
    pairs = np.asarray(pairs, np.int64).reshape(-1, 2)
    graph = coo_array((np.ones(len(pairs)), pairs.T), shape=(n, n))
    label = connected_components(graph.tocsr(), directed=False)[1]
    return np.unique(label, return_index=True)[1][label]


@st.composite
def linked(draw):
    n = draw(st.integers(1, 30))
    number = st.integers(0, n - 1)
    pairs = draw(st.lists(st.tuples(number, number), max_size=40))
    return n, np.array(pairs, np.int64).reshape(-1, 2), draw(bounds(n)), draw(st.integers(0, 99))


def assert_linked(n, pairs, first, seed):
    size = len(first) - 1
    holder = np.random.default_rng(seed).integers(0, size, len(pairs))

    def act(comm):
        return lowest_of_pairs(pairs[holder == comm.rank], first=first, comm=comm)

    found = run_ranks(size, act)
    gid = np.concatenate([part[0] for part in found])
    assert gid.tolist() == np.unique(pairs).tolist()
    assert np.array_equal(
        np.concatenate([part[1] for part in found]), lowest_by_scipy(n, pairs)[gid]
    )


@given(linked())
def test_linked_numbers_are_named_by_the_lowest(case):
    assert_linked(*case)


def test_long_chains_take_few_rounds():
    n, size = 512, 4
    order = np.random.default_rng(0).permutation(n)
    for chain in (np.arange(n), np.arange(n)[::-1], order):
        pairs = np.stack([chain[:-1], chain[1:]], axis=1)
        rounds = []

        def act(comm, pairs=pairs, rounds=rounds):
            reduce = comm.allreduce
            comm.allreduce = lambda *args: (rounds.append(comm.rank), reduce(*args))[1]
            mine = pairs[comm.rank :: comm.size]
            return lowest_of_pairs(mine, first=np.arange(size + 1) * (n // size), comm=comm)

        assert all(not part[1].any() for part in run_ranks(size, act))
        assert rounds.count(0) <= 14


@st.composite
def parted(draw):
    shape = draw(st.sampled_from([(5, 4), (3, 3, 2), (12, 1)]))
    mesh = grid(shape, simplices=draw(st.booleans()))
    part = draw(st.lists(st.integers(0, 1), min_size=mesh.n_cells, max_size=mesh.n_cells))
    return mesh, np.array(part, np.int32), draw(bounds(mesh.n_cells))


@settings(max_examples=25)
@given(parted())
def test_pieces_of_parts(case):
    mesh, part, first = case
    graph = cell_graph(mesh)
    row = np.repeat(np.arange(mesh.n_cells), np.diff(graph.indptr))
    inside = part[row] == part[graph.indices]
    lowest = lowest_by_scipy(mesh.n_cells, np.stack([row, graph.indices], axis=1)[inside])

    def act(held):
        local = graph_slice(held)
        mine = part[first[held.comm.rank] : first[held.comm.rank + 1]]
        pieces = find_pieces(local, local.extend(mine))
        cell, size = pieces.counted(local)
        return pieces.lowest(local), cell + local.first_gid, size

    found = on_slices(mesh, first, act)
    assert np.array_equal(np.concatenate([f[0] for f in found]), lowest)
    root, size = np.unique(lowest, return_counts=True)
    assert np.array_equal(np.concatenate([f[1] for f in found]), root)
    assert np.array_equal(np.concatenate([f[2] for f in found]), size)


def test_components_are_numbered_as_in_the_whole_mesh(degenerate):
    mesh = degenerate.mesh
    if mesh.points is None and mesh.faces is None:
        return
    count, label = components(cell_graph(mesh))
    for first in all_bounds(mesh.n_cells):
        found = on_slices(mesh, first, lambda held: number_pieces(graph_slice(held)))
        assert {f[0] for f in found} == {count}
        assert np.concatenate([f[1] for f in found]).tolist() == label.tolist()


def test_a_snake_through_all_ranks_is_one_piece():
    n = 40
    way = np.random.default_rng(3).permutation(n)
    pairs = np.stack([way[:-1], way[1:]], axis=1)
    mesh = Mesh.from_faces(pairs, np.ones(n - 1), np.zeros((n, 2)), np.ones(n))
    found = on_slices(mesh, np.arange(n + 1), lambda held: number_pieces(graph_slice(held))[0])
    assert set(found) == {1}
