"""Exchange lists against their slow twin, and the laws they must keep."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.errors import InputError, MeshError, PartitionError
from sfcpart.graph import CellGraph, cell_graph
from sfcpart.halo import build_halo, build_halo_slice
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.slices.graph_slice import graph_slice
from sfcpart.slices.routing import block_bounds
from tests.oracles.halo import exchange, halo_sets, near_over_faces, near_over_points
from tests.sliced import all_bounds, bounds, on_slices
from tests.strategies import grid, small_meshes


def graph_of(pairs: np.ndarray, n_cells: int) -> CellGraph:
    """Make a cell graph of pairs of cells; a pair given twice has two faces."""
    one, other = np.asarray(pairs, np.int64).reshape(-1, 2).T
    order = np.lexsort((np.r_[other, one], np.r_[one, other]))
    rows, columns = np.r_[one, other][order], np.r_[other, one][order]
    indptr = np.searchsorted(rows, np.arange(n_cells + 1)).astype(np.int64)
    return CellGraph(
        indptr=indptr,
        indices=columns.astype(np.int32),
        data=np.ones(len(columns)),
        boundary_count=np.zeros(n_cells, np.int32),
        boundary_measure=np.zeros(n_cells),
    )


@st.composite
def splits(draw):
    """Draw a graph (double edges, loners), a partition (empty parts), an order and layers."""
    n_cells = draw(st.integers(1, 25))
    cell = st.integers(0, n_cells - 1)
    pairs = draw(
        st.lists(st.tuples(cell, cell).filter(lambda pair: pair[0] != pair[1]), max_size=50)
    )
    n_parts = draw(st.integers(1, 8))
    parts = draw(st.lists(st.integers(0, n_parts - 1), min_size=n_cells, max_size=n_cells))
    order = np.array(draw(st.permutations(range(n_cells))))
    return (
        graph_of(pairs, n_cells),
        Partition.from_array(parts, n_parts),
        order,
        draw(st.integers(1, 4)),
    )


def assert_halo(halo, near, partition, order):
    """Assert every law of exchange lists against the sets of the twin."""
    rank = np.empty(len(order), np.int64)
    rank[order] = np.arange(len(order))
    wanted = halo_sets(near, partition.cell_part, partition.n_parts, halo.layers)
    for part in range(partition.n_parts):
        owned, foreign = halo.owned_cells(part), halo.halo_cells(part)
        assert sorted(owned.tolist()) == np.flatnonzero(partition.cell_part == part).tolist()
        assert np.all(np.diff(rank[owned]) > 0)
        assert len(set(foreign.tolist())) == len(foreign)
        assert set(foreign.tolist()) == wanted[part]
        owner = partition.cell_part[foreign]
        assert sorted(zip(owner, rank[foreign], strict=True)) == list(
            zip(owner, rank[foreign], strict=True)
        )
        assert halo.neighbours(part).tolist() == sorted(set(owner.tolist()))
    for part, held in enumerate(exchange(halo)):
        assert np.array_equal(held, np.r_[halo.owned_cells(part), halo.halo_cells(part)])
    assert len(halo.send) == len(halo.halo)


@given(splits())
def test_across_faces_like_the_twin(split):
    graph, partition, order, layers = split
    halo = build_halo(None, graph, partition, order=order, layers=layers)
    assert_halo(halo, near_over_faces(graph), partition, order)


@given(small_meshes(), st.data())
def test_across_points_like_the_twin(mesh, data):
    n_parts = data.draw(st.integers(1, 6))
    parts = data.draw(
        st.lists(st.integers(0, n_parts - 1), min_size=mesh.n_cells, max_size=mesh.n_cells)
    )
    partition, order = Partition.from_array(parts, n_parts), np.arange(mesh.n_cells)
    layers = data.draw(st.integers(1, 3))
    halo = build_halo(mesh, None, partition, order=order, layers=layers, across="points")
    assert_halo(halo, near_over_points(mesh), partition, order)


def test_a_row_of_cells_by_hand():
    graph = graph_of([(0, 1), (1, 2), (2, 3), (3, 4), (4, 5)], 6)
    thirds = Partition.from_array([0, 0, 1, 1, 2, 2])
    halo = build_halo(None, graph, thirds, order=[5, 4, 3, 2, 1, 0], layers=2)
    assert halo.owned_cells(1).tolist() == [3, 2]
    assert halo.halo_cells(1).tolist() == [1, 0, 5, 4]
    assert halo.send_list(1, 0).tolist() == [0, 1]
    assert halo.receive_list(1, 2).tolist() == [4, 5]
    assert halo.neighbours(0).tolist() == [1]


def test_no_layers_no_halo():
    halo = build_halo(None, None, Partition.from_array([1, 0, 1]), order=[2, 1, 0], layers=0)
    assert halo.owned_cells(1).tolist() == [2, 0]
    assert len(halo.halo) == len(halo.send) == len(halo.neighbour) == 0
    assert halo.neighbours(0).tolist() == []


def test_a_cell_near_very_many_parts():
    n = 270
    graph = graph_of([(0, leaf) for leaf in range(1, n)], n)
    partition, order = Partition.from_array(np.arange(n)), np.arange(n)
    halo = build_halo(None, graph, partition, order=order, layers=2)
    assert_halo(halo, near_over_faces(graph), partition, order)
    assert len(halo.neighbours(0)) == n - 1


def test_across_points_is_wider_than_across_faces():
    mesh = grid((2, 2))
    quarters, order = Partition.from_array(np.arange(4)), np.arange(4)
    graph = graph_of([(0, 1), (2, 3), (0, 2), (1, 3)], 4)
    assert build_halo(mesh, graph, quarters, order=order).halo_cells(0).tolist() == [1, 2]
    wide = build_halo(mesh, graph, quarters, order=order, across="points")
    assert wide.halo_cells(0).tolist() == [1, 2, 3]


def test_same_lists_on_any_number_of_threads(monkeypatch):
    n = 40_000
    rng = np.random.default_rng(5)
    pairs = rng.integers(0, n, (n, 2))
    graph = graph_of(pairs[pairs[:, 0] != pairs[:, 1]], n)
    partition = Partition.from_array(rng.integers(0, 30, n), 30)
    order = rng.permutation(n)
    seen = []
    for threads in ("1", "3"):
        monkeypatch.setenv("SFCPART_THREADS", threads)
        seen.append(build_halo(None, graph, partition, order=order))
    for name in ("owned", "halo", "neighbour", "receive_indptr", "send_indptr", "send"):
        assert np.array_equal(getattr(seen[0], name), getattr(seen[1], name))


def test_arrays_are_read_only_and_narrow():
    graph = graph_of([(0, 1)], 2)
    halo = build_halo(None, graph, Partition.from_array([0, 1]), order=np.arange(2))
    assert halo.halo.dtype == halo.send.dtype == np.int32
    for name in ("owned", "owned_indptr", "halo", "neighbour", "send", "receive_indptr"):
        with pytest.raises(ValueError, match="read-only"):
            getattr(halo, name)[:] = 0


def test_default_order_is_the_curve_order():
    from sfcpart.curve import curve_order

    mesh = grid((4, 4))
    halo = build_halo(mesh, graph_of([], 16), Partition.from_array([0] * 16))
    assert halo.owned_cells(0).tolist() == curve_order(mesh.centers).tolist()


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"layers": -1}, "layers is -1"),
        ({"layers": 1.5}, "layers is 1.5"),
        ({"layers": True}, "layers is True"),
        ({"across": "edges"}, "across is 'edges'"),
        ({"order": [0, 0]}, "no permutation"),
        ({"order": [0, 2]}, "no permutation"),
        ({"order": [0]}, "wanted the 2 cells"),
        ({"order": None}, "neither mesh nor order"),
    ],
)
def test_wrong_options_are_named(options, message):
    graph, partition = graph_of([(0, 1)], 2), Partition.from_array([0, 1])
    with pytest.raises(InputError, match=message):
        build_halo(None, graph, partition, **{"order": np.arange(2), **options})


def test_missing_or_foreign_relations_are_named():
    halves, order = Partition.from_array([0, 1]), np.arange(2)
    with pytest.raises(InputError, match="graph is missing"):
        build_halo(None, None, halves, order=order)
    with pytest.raises(PartitionError, match="2 cells and the graph 3"):
        build_halo(None, graph_of([], 3), halves, order=order)
    with pytest.raises(PartitionError, match="2 cells and the mesh 4"):
        build_halo(grid((2, 2)), None, halves, order=order, across="points")
    bare = Mesh.from_centers([[0.0, 0.0], [1.0, 0.0]])
    with pytest.raises(MeshError, match="no points"):
        build_halo(bare, None, halves, order=order, across="points")


def test_parts_that_do_not_meet_are_told():
    graph = graph_of([(0, 1), (1, 2)], 3)
    halo = build_halo(None, graph, Partition.from_array([0, 1, 2]), order=np.arange(3))
    with pytest.raises(InputError, match=r"parts 0 and 2 exchange nothing.*\[1\]"):
        halo.send_list(0, 2)


ARRAYS = ("owned", "halo", "neighbour", "send")
OFFSETS = ("owned_indptr", "halo_indptr", "neighbour_indptr", "receive_indptr", "send_indptr")


def assert_same_over_slices(mesh, partition, first, **options):
    """Assert that the lists of all ranks, one after the other, are those of the whole mesh."""
    graph = cell_graph(mesh) if mesh.points is not None or mesh.faces is not None else None
    whole = build_halo(mesh, graph, partition, **options)

    def act(held):
        mine = partition.cell_part[held.first_gid : held.first_gid + held.n_local]
        rows = None if graph is None else graph_slice(held)
        part = Partition.from_array(mine, partition.n_parts)
        return build_halo_slice(held, rows, part, **options)

    found = on_slices(mesh, first, act)
    size = len(found)
    assert [halo.first_part for halo in found] == block_bounds(whole.n_parts, size)[:-1].tolist()
    assert sum(halo.n_parts for halo in found) == whole.n_parts
    for name in ARRAYS:
        joined = np.concatenate([getattr(halo, name) for halo in found])
        assert joined.dtype == getattr(whole, name).dtype
        assert joined.tolist() == getattr(whole, name).tolist(), name
    for name in OFFSETS:
        rows = np.concatenate([np.diff(getattr(halo, name)) for halo in found])
        assert rows.tolist() == np.diff(getattr(whole, name)).tolist(), name
    for halo in found:
        for part in range(halo.first_part, halo.first_part + halo.n_parts):
            assert halo.owned_cells(part).tolist() == whole.owned_cells(part).tolist()
            assert halo.neighbours(part).tolist() == whole.neighbours(part).tolist()
            for other in halo.neighbours(part).tolist():
                assert halo.send_list(part, other).tolist() == whole.send_list(part, other).tolist()
                assert np.array_equal(
                    halo.receive_list(part, other), whole.receive_list(part, other)
                )


@st.composite
def sliced_cases(draw):
    mesh = draw(small_meshes())
    n_parts = draw(st.integers(1, mesh.n_cells + 2))
    part = draw(st.lists(st.integers(0, n_parts - 1), min_size=mesh.n_cells, max_size=mesh.n_cells))
    options = {
        "layers": draw(st.integers(0, 3)),
        "across": draw(st.sampled_from(["faces", "points"])),
    }
    return mesh, Partition.from_array(part, n_parts), draw(bounds(mesh.n_cells)), options


@given(sliced_cases())
def test_slices_give_the_lists_of_the_whole(case):
    *where, options = case
    assert_same_over_slices(*where, **options)


def test_slices_of_degenerate_meshes(degenerate):
    mesh, n_parts = degenerate.mesh, degenerate.n_parts
    partition = Partition.from_array(np.arange(mesh.n_cells) * n_parts // mesh.n_cells, n_parts)
    for first in all_bounds(mesh.n_cells):
        if mesh.points is not None:
            assert_same_over_slices(mesh, partition, first, layers=2, across="points")
        layers = int(mesh.points is not None or mesh.faces is not None)
        assert_same_over_slices(mesh, partition, first, layers=layers)


def test_an_error_of_one_rank_is_raised_on_all():
    mesh = grid((4, 2))

    def act(held, **options):
        short = Partition.from_array([0] * (held.n_local - held.comm.rank), 2)
        return build_halo_slice(held, graph_slice(held), short, **options)

    for options, text in (
        ({}, "3 cells and the graph 4"),
        ({"across": "points"}, "3 cells and the mesh 4"),
        ({"layers": 0}, "3 cells and the mesh 4"),
        ({"layers": -1}, "whole number"),
    ):
        with pytest.raises((PartitionError, InputError), match=text):
            on_slices(mesh, [0, 4, 8], lambda held, options=options: act(held, **options))
