"""The cell graph over slices against that of the whole mesh, bit for bit."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.comm import run_ranks
from sfcpart.errors import MeshError
from sfcpart.graph import cell_graph
from sfcpart.kernels.mesh import faces
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.graph_slice import GraphSlice, graph_slice
from sfcpart.slices.mesh_slice import cut_mesh
from tests.sliced import all_bounds, bounds, on_slices
from tests.strategies import grid, small_meshes
from tests.unit.test_graph import SOLID_WIDTH, WIDTH, tangles


def assert_same_graph(mesh, rank_first):
    whole = cell_graph(mesh)
    parts = on_slices(mesh, rank_first, graph_slice)
    degree = np.concatenate([np.diff(part.indptr) for part in parts])
    assert np.array_equal(degree, np.diff(whole.indptr))
    assert np.array_equal(
        np.concatenate([part.gid_of(part.indices) for part in parts]), whole.indices
    )
    for name in ("data", "boundary_count", "boundary_measure"):
        joined = np.concatenate([getattr(part, name) for part in parts])
        assert joined.tobytes() == getattr(whole, name).tobytes(), name
    for part in parts:
        assert np.all(np.diff(part.ghost_gid) > 0)
        assert not part.indices.flags.writeable


@st.composite
def sliced(draw, meshes):
    mesh = draw(meshes)
    return mesh, draw(bounds(mesh.n_cells))


@given(sliced(tangles({**WIDTH, "polygon": 0})))
def test_plane_tangles(case):
    assert_same_graph(*case)


@given(sliced(tangles({**SOLID_WIDTH, "polyhedron": 0})))
def test_solid_tangles(case):
    assert_same_graph(*case)


@given(sliced(tangles({"polyhedron": 0, "hexa_prism": 12})))
def test_large_faces(case):
    assert_same_graph(*case)


@given(sliced(small_meshes()))
def test_grids(case):
    assert_same_graph(*case)


@st.composite
def faces_meshes(draw):
    n = draw(st.integers(1, 9))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    m = draw(st.integers(0, 20))
    pair = np.stack([rng.integers(0, n, m), rng.integers(-1, n, m)], axis=1)
    pair = pair[pair[:, 0] != pair[:, 1]]
    size = rng.integers(1, 4, len(pair)) / 7
    return Mesh.from_faces(pair.reshape(-1, 2), size, rng.random((n, 2)), np.ones(n))


@given(sliced(faces_meshes()))
def test_given_faces(case):
    assert_same_graph(*case)


def test_degenerate_meshes(degenerate):
    mesh = degenerate.mesh
    for rank_first in all_bounds(mesh.n_cells):
        if mesh.points is None and mesh.faces is None:
            with pytest.raises(MeshError, match="centres only"):
                on_slices(mesh, rank_first, graph_slice)
        else:
            assert_same_graph(mesh, rank_first)


def test_a_cell_with_one_face_twice_meets_a_cell_elsewhere():
    """Locally both sides are one cell and no face; with a cell of another rank they are."""
    points = np.random.default_rng(1).random((6, 3))
    twice = [[0, 1, 2], [2, 0, 1], [0, 1, 3], [1, 2, 3], [0, 2, 3]]
    once = [[0, 1, 2], [0, 1, 4], [1, 2, 4], [0, 2, 4]]
    mesh = Mesh.from_arrays(points, {"polyhedron": [twice, once]})
    assert cell_graph(mesh).indices.tolist() == [1, 0]
    assert_same_graph(mesh, [0, 1, 2])
    assert_same_graph(mesh, [0, 0, 1, 1, 2])


def test_only_faces_on_shared_points_are_sent():
    mesh = grid((4, 4, 12))
    sent = []

    def act(comm):
        count = comm.alltoall
        held = cut_mesh(mesh, comm)
        comm.alltoall = lambda rows: (sent.append(sum(map(len, rows))), count(rows))[1]
        graph_slice(held)

    run_ranks(2, act)
    assert max(sent) <= 4 * 4 * 6 * 4  # corners of faces of the 16 cells of one layer
    assert max(sent) >= 4 * 4 * 4


def test_fetch_brings_rows_of_ghosts():
    mesh = grid((3, 2, 2))

    def act(held):
        graph = graph_slice(held)
        gid = held.cell_gid
        twice = [graph.fetch(np.stack([gid, 2 * gid], axis=1)) for _ in range(2)]
        assert np.array_equal(twice[0], twice[1])
        assert twice[0].tolist() == np.stack([graph.ghost_gid, 2 * graph.ghost_gid], 1).tolist()
        return graph.extend(gid.astype(np.float64)).tolist(), graph.gid_of(
            np.arange(graph.n_local + graph.n_ghost)
        ).tolist()

    for here, gid in on_slices(mesh, [0, 5, 5, 12], act):
        assert here == gid


def test_a_whole_graph_is_a_slice():
    graph = cell_graph(grid((3, 2)))
    whole = GraphSlice.whole(graph)
    assert (whole.n_local, whole.n_ghost, whole.first_gid, whole.n_cells) == (6, 0, 0, 6)
    assert whole.indices is graph.indices
    assert whole.extend(graph.boundary_count) is graph.boundary_count


def test_too_many_faces_on_one_rank_are_refused_on_all(monkeypatch):
    monkeypatch.setattr(faces, "ID_LIMIT", 24)
    with pytest.raises(MeshError, match="curve alone"):
        on_slices(grid((3, 3)), [0, 1, 9], graph_slice)
