"""The cell graph against a dictionary of frozensets, and its own promises."""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.sparse.csgraph import connected_components

from sfcpart.errors import MeshError
from sfcpart.graph import cell_graph, components
from sfcpart.kernels import threads
from sfcpart.mesh.mesh import Mesh
from tests.oracles.faces import cell_faces, neighbours, vector_area
from tests.strategies import grid, small_meshes

WIDTH = {"triangle": 3, "quad": 4, "pixel": 4, "triangle6": 6, "quad8": 8}
SOLID_WIDTH = {
    "tetra": 4,
    "pyramid": 5,
    "wedge": 6,
    "hexahedron": 8,
    "voxel": 8,
    "penta_prism": 10,
    "hexa_prism": 12,
    "tetra10": 10,
    "hexahedron20": 20,
}


def pairs_of(graph):
    """Count the entries of each pair of cells in the upper half."""
    row = np.repeat(np.arange(graph.n_cells), np.diff(graph.indptr))
    upper = row < graph.indices
    return Counter(zip(row[upper].tolist(), graph.indices[upper].tolist(), strict=True))


def assert_graph(graph):
    """Assert what every cell graph promises: sorted rows, symmetric bits, no self-loops."""
    row = np.repeat(np.arange(graph.n_cells), np.diff(graph.indptr))
    column, data = np.asarray(graph.indices), np.asarray(graph.data)
    assert graph.indptr.dtype == np.int64
    assert graph.indptr[0] == 0 and graph.indptr[-1] == len(column) == len(data)
    assert not np.any(row == column)
    order = np.lexsort((data, column, row))
    assert np.array_equal(order, np.arange(len(row)))
    back = np.lexsort((data, row, column))
    assert np.array_equal(row[back], column) and np.array_equal(column[back], row)
    assert np.array_equal(data[back], data)
    assert graph.boundary_count.dtype == np.int32
    assert not graph.indices.flags.writeable and not graph.data.flags.writeable


def assert_as_oracle(mesh):
    graph = cell_graph(mesh)
    assert_graph(graph)
    pairs, boundary = neighbours(mesh)
    assert pairs_of(graph) == pairs
    assert graph.boundary_count.tolist() == boundary.tolist()
    return graph


def assert_measures(mesh):
    """Assert measures of faces against numpy (no twisted or collapsed faces here)."""
    graph, faces = cell_graph(mesh), cell_faces(mesh)
    for c in range(mesh.n_cells):
        mine = {frozenset(face): vector_area(mesh.points, face) for face in faces[c]}
        whole = graph.data[graph.indptr[c] : graph.indptr[c + 1]].sum() + graph.boundary_measure[c]
        assert whole == pytest.approx(sum(mine.values()))
        for d, size in zip(
            graph.indices[graph.indptr[c] : graph.indptr[c + 1]],
            graph.data[graph.indptr[c] : graph.indptr[c + 1]],
            strict=True,
        ):
            shared = mine.keys() & {frozenset(face) for face in faces[d]}
            assert any(size == pytest.approx(mine[face]) for face in shared)


@st.composite
def tangles(draw, widths):
    """Draw blocks of cells over few points: repeated points, twisted sides, many cells a face."""
    n_points = draw(st.integers(5, 14))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    blocks = []
    for name in draw(st.lists(st.sampled_from(sorted(widths)), min_size=1, max_size=4)):
        n = draw(st.integers(1, 6))
        if name == "polygon":
            rows = [rng.integers(0, n_points, rng.integers(3, 8)).tolist() for _ in range(n)]
        elif name == "polyhedron":
            rows = [
                [
                    rng.permutation(n_points)[: rng.integers(3, 6)].tolist()
                    for _ in range(rng.integers(4, 7))
                ]
                for _ in range(n)
            ]
        else:
            rows = rng.integers(0, n_points, (n, widths[name]))
        blocks.append((name, rows))
    return Mesh.from_arrays(rng.random((n_points, 3)), blocks)


@given(tangles({**WIDTH, "polygon": 0}))
def test_plane_tangles_match_the_oracle(mesh):
    assert_as_oracle(mesh)


@given(tangles({**SOLID_WIDTH, "polyhedron": 0}))
def test_solid_tangles_match_the_oracle(mesh):
    assert_as_oracle(mesh)


@given(tangles({"polyhedron": 0, "hexa_prism": 12}))
def test_large_faces_match_the_oracle(mesh):
    assert_as_oracle(mesh)


@given(small_meshes())
def test_grids_match_the_oracle(mesh):
    assert_as_oracle(mesh)
    assert_measures(mesh)


def test_degenerate_meshes_have_graphs(degenerate):
    mesh = degenerate.mesh
    if mesh.points is None and mesh.faces is None:
        with pytest.raises(MeshError, match="centres only"):
            cell_graph(mesh)
    elif mesh.points is None:
        assert_graph(cell_graph(mesh))
    else:
        assert_as_oracle(mesh)


@given(small_meshes(), st.integers(0, 2**32 - 1))
def test_renumbered_cells_give_the_permuted_graph(mesh, seed):
    order = np.random.default_rng(seed).permutation(mesh.n_cells)
    rows = np.asarray(mesh.indices).reshape(mesh.n_cells, -1)
    moved = Mesh.from_cells(mesh.points, mesh.kind, mesh.indptr, rows[order].reshape(-1))
    expected = cell_graph(mesh).to_scipy()[order][:, order]
    got = cell_graph(moved).to_scipy()
    assert (expected != got).nnz == 0
    assert cell_graph(moved).boundary_count.tolist() == (
        cell_graph(mesh).boundary_count[order].tolist()
    )


@given(small_meshes(), st.integers(0, 2**32 - 1))
def test_renumbered_points_change_nothing(mesh, seed):
    to = np.random.default_rng(seed).permutation(mesh.n_points)
    points = np.empty_like(mesh.points)
    points[to] = mesh.points
    moved = Mesh.from_cells(points, mesh.kind, mesh.indptr, to[mesh.indices])
    graph, got = cell_graph(mesh), cell_graph(moved)
    assert np.array_equal(graph.indices, got.indices)
    assert np.allclose(graph.data, got.data, rtol=1e-14, atol=0)
    assert np.array_equal(graph.boundary_count, got.boundary_count)


def as_polyhedra(mesh):
    """Write the cells of a mesh as polyhedra, each face listed by each cell, any way round."""
    faces = cell_faces(mesh)
    turned = [
        [face[::-1] if (c + i) % 3 == 0 else face for i, face in enumerate(mine)]
        for c, mine in enumerate(faces)
    ]
    return Mesh.from_arrays(mesh.points, {"polyhedron": turned})


def test_hexahedra_as_polyhedra_are_the_same_graph():
    mesh = grid((3, 2, 4))
    graph, got = cell_graph(mesh), cell_graph(as_polyhedra(mesh))
    for name in ("indptr", "indices", "data", "boundary_count", "boundary_measure"):
        assert np.array_equal(getattr(graph, name), getattr(got, name)), name


def test_hexahedra_beside_polyhedra_match():
    mesh = grid((4, 3, 3))
    rows = np.asarray(mesh.indices).reshape(-1, 8)
    some = np.arange(mesh.n_cells) % 2 == 0
    poly = [cell_faces(mesh)[c] for c in np.flatnonzero(some)]
    mixed = Mesh.from_arrays(mesh.points, [("polyhedron", poly), ("hexahedron", rows[~some])])
    order = np.concatenate([np.flatnonzero(some), np.flatnonzero(~some)])
    expected = cell_graph(mesh).to_scipy()[order][:, order]
    assert (expected != cell_graph(mixed).to_scipy()).nnz == 0


def test_every_pair_is_joined_where_sheets_meet():
    points = np.array([(0, 0, 0), (0, 0, 2), (1, 0, 0), (0, 1, 0), (-1, 0, 0)], float)
    mesh = Mesh.from_arrays(points, {"triangle": [[0, 1, 2], [1, 0, 3], [0, 1, 4]]})
    graph = cell_graph(mesh)
    assert graph.to_scipy().toarray().tolist() == [[0, 2, 2], [2, 0, 2], [2, 2, 0]]
    assert graph.boundary_count.tolist() == [2, 2, 2]


def test_one_point_with_very_many_faces():
    n = 500  # more than the small buckets take
    angle = np.linspace(0, 2 * np.pi, n, endpoint=False)
    points = np.concatenate([[[0, 0]], np.column_stack([np.cos(angle), np.sin(angle)])])
    order = np.random.default_rng(5).permutation(n)
    fan = np.column_stack([np.zeros(n, int), order + 1, (order + 1) % n + 1])
    graph = assert_as_oracle(Mesh.from_arrays(points, {"triangle": fan}))
    assert graph.n_faces == n


def test_a_collapsed_hexahedron_meets_a_wedge():
    points = np.array(
        [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (2, 0, 0), (2, 0, 1)],
        float,
    )
    # hexahedron with one side pressed into an edge, beside a wedge on face 1, 2, 5, 4
    mesh = Mesh.from_arrays(
        points, [("hexahedron", [[0, 1, 2, 2, 3, 4, 5, 5]]), ("wedge", [[1, 2, 6, 4, 5, 7]])]
    )
    graph = assert_as_oracle(mesh)
    assert graph.to_scipy().toarray()[0, 1] == 1.0
    assert graph.boundary_count.tolist() == [4, 4]


def test_faces_given_twice_count_twice():
    mesh = Mesh.from_faces(
        [[0, 1], [1, 0], [1, -1], [-1, 0]], [3.0, 2.0, 7.0, 5.0], [[0, 0], [1, 0]], [1, 1]
    )
    graph = cell_graph(mesh)
    assert_graph(graph)
    assert graph.indices.tolist() == [1, 1, 0, 0]
    assert graph.data.tolist() == [2, 3, 2, 3]
    assert graph.boundary_measure.tolist() == [5, 7]


@given(st.integers(2, 12), st.integers(0, 2**32 - 1))
def test_given_faces_are_sorted_into_rows(n, seed):
    rng = np.random.default_rng(seed)
    pair = rng.integers(0, n, (int(rng.integers(0, 400)), 2))
    pair = pair[pair[:, 0] != pair[:, 1]]
    pair[rng.random(len(pair)) < 0.2, 1] = -1
    measure = rng.integers(0, 4, len(pair)) / 4
    graph = cell_graph(Mesh.from_faces(pair, measure, rng.random((n, 3)), np.ones(n)))
    rows = [[] for _ in range(n)]
    for (a, b), size in zip(pair.tolist(), measure.tolist(), strict=True):
        if b >= 0:
            rows[a].append((b, size))
            rows[b].append((a, size))
    flat = [entry for row in rows for entry in sorted(row)]
    got = zip(graph.indices.tolist(), graph.data.tolist(), strict=True)
    assert list(got) == flat
    assert_graph(graph)
    bare = [pair[(pair[:, 1] < 0) & (pair[:, 0] == c)] for c in range(n)]
    assert graph.boundary_count.tolist() == [len(each) for each in bare]


def test_more_faces_than_can_be_numbered_are_refused(monkeypatch):
    from sfcpart.kernels.mesh import faces

    monkeypatch.setattr(faces, "ID_LIMIT", 24)
    assert cell_graph(grid((2, 1, 1))).n_faces == 1
    with pytest.raises(MeshError, match="24 points or faces of cells; a cell graph takes fewer"):
        cell_graph(grid((3, 2, 1)))


def test_the_graph_is_kept_with_the_mesh_and_its_copies():
    mesh = grid((3, 3))
    graph = cell_graph(mesh)
    assert cell_graph(mesh) is graph
    assert cell_graph(mesh.with_cell_field("region", np.arange(9))) is graph


@pytest.mark.large
def test_the_number_of_threads_changes_nothing(monkeypatch):
    mesh = grid((40, 30, 40))
    order = np.random.default_rng(3).permutation(mesh.n_cells)
    rows = np.asarray(mesh.indices).reshape(-1, 8)[order]
    results = []
    for count in ("1", "2", "3"):
        monkeypatch.setenv("SFCPART_THREADS", count)
        assert threads.n_threads() == int(count)
        results.append(cell_graph(Mesh.from_arrays(mesh.points, {"hexahedron": rows})))
    for other in results[1:]:
        for name in ("indptr", "indices", "data", "boundary_count", "boundary_measure"):
            assert np.array_equal(getattr(results[0], name), getattr(other, name)), name


@given(small_meshes(), st.integers(0, 2**32 - 1))
def test_components_agree_with_scipy(mesh, seed):
    rng = np.random.default_rng(seed)
    keep = np.flatnonzero(rng.random(mesh.n_cells) < 0.6)
    rows = np.asarray(mesh.indices).reshape(mesh.n_cells, -1)
    name = {3: "triangle", 4: "quad" if mesh.dim == 2 else "tetra", 8: "hexahedron"}[rows.shape[1]]
    if not len(keep):
        return
    graph = cell_graph(Mesh.from_arrays(mesh.points, {name: rows[keep]}))
    count, label = components(graph)
    # scipy.sparse.csgraph.connected_components, a reference library
    expected_count, expected = connected_components(graph.to_scipy(), directed=False)
    assert count == expected_count and label.dtype == np.int32
    assert len(set(zip(label.tolist(), expected.tolist(), strict=True))) == count
    first = [int(np.flatnonzero(label == i)[0]) for i in range(count)]
    assert first == sorted(first)
