"""Points that coincide, against every pair compared."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.errors import MeshError
from sfcpart.graph import cell_graph
from sfcpart.mesh.merge import coincident_points
from sfcpart.mesh.mesh import BoundaryGroup, Mesh
from tests.oracles.faces import cell_faces
from tests.strategies import clouds, grid, small_meshes


def by_every_pair(points, tolerance):
    """Spread the lowest number over pairs within the tolerance until nothing changes."""
    apart = points[:, None] - points[None]
    close = (apart**2).sum(axis=2) <= tolerance**2
    lowest = np.arange(len(points))
    while True:
        new = np.array([lowest[row].min() for row in close])
        if np.array_equal(new, lowest):
            return lowest
        lowest = new


@given(clouds(max_size=60), st.sampled_from([0.0, 1e-12, 1e-3, 0.1, 4.0, 1e7]))
def test_lowest_points_are_those_of_every_pair_compared(points, tolerance):
    assert (
        coincident_points(points, tolerance).tolist() == by_every_pair(points, tolerance).tolist()
    )


def test_a_wide_tolerance_over_many_points():
    points = np.random.default_rng(2).random((400, 3))
    assert coincident_points(points, 0.08).tolist() == by_every_pair(points, 0.08).tolist()


def torn(mesh, jitter=0.0):
    """Give every cell points of its own."""
    rng = np.random.default_rng(1)
    points = mesh.points[mesh.indices]
    points = points + rng.uniform(-jitter, jitter, points.shape)
    return Mesh.from_cells(points, mesh.kind, mesh.indptr, np.arange(len(points)))


@given(small_meshes(), st.sampled_from([0.0, 1e-9]))
def test_merging_closes_a_mesh_torn_at_every_face(mesh, jitter):
    scale = float(np.ptp(mesh.points, axis=0).min()) * 1e-3
    broken = torn(mesh, jitter * scale)
    assert cell_graph(broken).n_faces == 0
    mended = broken.with_points_merged(1e-3 * scale)
    assert mended.n_points == mesh.n_points
    graph, expected = cell_graph(mended), cell_graph(mesh)
    assert np.array_equal(graph.indptr, expected.indptr)
    assert np.array_equal(graph.indices, expected.indices)


def test_polyhedra_boundary_and_point_fields_follow():
    cube = grid((2, 1, 1))
    faces = cell_faces(cube)
    first = [list(face) for face in faces[0]]
    second = [[p + cube.n_points for p in face] for face in faces[1]]
    points = np.concatenate([cube.points, cube.points])
    edge = BoundaryGroup("edge", 3, np.array([3], np.uint8), np.array([0, 2]), np.array([13, 12]))
    mesh = Mesh.from_arrays(
        points,
        {"polyhedron": [first, second]},
        point_fields={"id": np.arange(24)},
        boundary=[edge],
    )
    merged = mesh.with_points_merged(0.0)
    assert cell_graph(merged).n_faces == 1
    assert merged.point_fields["id"].tolist() == list(range(12))
    assert merged.boundary[0].indices.tolist() == [1, 0]
    assert merged.measures.tolist() == [1, 1]


def test_nothing_to_merge_gives_the_same_mesh():
    mesh = grid((2, 2))
    assert mesh.with_points_merged(0.5) is mesh


def test_bad_tolerances_and_meshes_without_points_are_refused():
    with pytest.raises(MeshError, match="tolerance is -1.0"):
        grid((1, 1)).with_points_merged(-1.0)
    with pytest.raises(MeshError, match="tolerance is nan"):
        grid((1, 1)).with_points_merged(float("nan"))
    with pytest.raises(MeshError, match="no points"):
        Mesh.from_centers([[0, 0]]).with_points_merged(0.1)
