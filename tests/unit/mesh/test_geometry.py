"""Centroids and measures against formulas and against slow twins in numpy."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.mesh.kinds import KINDS
from sfcpart.mesh.mesh import Mesh
from tests.oracles.faces import cell_faces, solid
from tests.strategies import grid, small_meshes
from tests.unit.test_graph import as_polyhedra

CUBE = np.array(
    [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1)], float
)
REGULAR = {  # corners of one cell of each kind, in the order of the VTK file formats
    "tetra": [(0, 0, 0), (1, 0, 0), (0, 1, 0), (0, 0, 1)],
    "voxel": CUBE[[0, 1, 3, 2, 4, 5, 7, 6]],
    "hexahedron": CUBE,
    "wedge": [(0, 0, 0), (0, 1, 0), (1, 0, 0), (0, 0, 1), (0, 1, 1), (1, 0, 1)],
    "pyramid": [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0.5, 0.5, 1)],
}
VOLUME = {"tetra": 1 / 6, "voxel": 1, "hexahedron": 1, "wedge": 1 / 2, "pyramid": 1 / 3}
CENTROID = {
    "tetra": (1 / 4, 1 / 4, 1 / 4),
    "voxel": (1 / 2, 1 / 2, 1 / 2),
    "hexahedron": (1 / 2, 1 / 2, 1 / 2),
    "wedge": (1 / 3, 1 / 3, 1 / 2),
    "pyramid": (1 / 2, 1 / 2, 1 / 4),
}


def prism(n):
    """Corners of a regular prism of height 2 with n sides on a circle of radius 1."""
    angle = 2 * np.pi * np.arange(n) / n
    ring = np.column_stack([np.cos(angle), np.sin(angle)])
    return np.concatenate([np.column_stack([ring, np.full(n, h)]) for h in (0.0, 2.0)])


@pytest.mark.parametrize("name", sorted(REGULAR))
def test_regular_solids(name):
    points = np.array(REGULAR[name], float)
    mesh = Mesh.from_arrays(points, {name: [np.arange(len(points))]})
    centers, signed = mesh.centers, mesh.signed_measures
    assert signed[0] == pytest.approx(VOLUME[name], rel=1e-14)
    assert centers[0] == pytest.approx(CENTROID[name], rel=1e-14)


@pytest.mark.parametrize(("name", "n"), [("penta_prism", 5), ("hexa_prism", 6)])
def test_prisms(name, n):
    mesh = Mesh.from_arrays(prism(n), {name: [np.arange(2 * n)]})
    # area of a regular polygon: n/2 sin(2 pi / n)
    assert mesh.signed_measures[0] == pytest.approx(n * np.sin(2 * np.pi / n), rel=1e-14)
    assert mesh.centers[0] == pytest.approx((0, 0, 1), abs=1e-15)


@pytest.mark.parametrize("code", [code for code, kind in KINDS.items() if kind.dim == 3])
@given(st.integers(0, 2**32 - 1))
def test_warped_solids_are_the_body_their_faces_enclose(code, seed):
    kind = KINDS[code]
    if not kind.n_corners:
        return
    base = {4: "tetra", 5: "pyramid", 6: "wedge"}.get(kind.n_corners, "hexahedron")
    corners = np.array(REGULAR["voxel" if code == 11 else base], float)
    if kind.n_corners > 8:
        corners = prism(kind.n_corners // 2)
    rng = np.random.default_rng(seed)
    corners = corners + rng.uniform(-0.1, 0.1, corners.shape) + rng.uniform(-5, 5, 3)
    nodes = kind.n_nodes or kind.n_corners + 3
    points = np.concatenate([corners, np.full((nodes - len(corners), 3), 99.0)])
    mesh = Mesh.from_cells(points, [code], [0, nodes], np.arange(nodes))
    volume, centroid = solid(points, cell_faces(mesh)[0])
    assert mesh.signed_measures[0] == pytest.approx(volume, rel=1e-10)
    assert mesh.centers[0] == pytest.approx(centroid, rel=1e-10)


@given(st.integers(3, 9), st.integers(0, 2**32 - 1), st.booleans())
def test_polygons_in_the_plane(n, seed, clockwise):
    rng = np.random.default_rng(seed)
    angle = np.sort(rng.uniform(0, 2 * np.pi, n))
    ring = rng.uniform(0.2, 1, n)[:, None] * np.column_stack([np.cos(angle), np.sin(angle)])
    ring = ring[::-1] if clockwise else ring
    mesh = Mesh.from_arrays(ring, {"polygon": [np.arange(n)]})
    x, y = ring.T
    cross = x * np.roll(y, -1) - y * np.roll(x, -1)  # the shoelace formula
    area = cross.sum() / 2
    assert mesh.signed_measures[0] == pytest.approx(area, rel=1e-9, abs=1e-12)
    assert mesh.measures[0] == pytest.approx(abs(area), rel=1e-9, abs=1e-12)
    if abs(area) > 0.1:
        moment = ((ring + np.roll(ring, -1, axis=0)) * cross[:, None]).sum(axis=0)
        inside = np.all(moment / (6 * area) >= ring.min(0)) and np.all(
            moment / (6 * area) <= ring.max(0)
        )
        expected = moment / (6 * area) if inside else ring.mean(axis=0)
        assert mesh.centers[0] == pytest.approx(expected, abs=1e-12)


def test_an_arrow_shaped_quad_counts_turned_triangles_off():
    # the mean of the corners lies outside this quadrilateral
    ring = np.array([(0, 0), (4, 1), (0, 2), (3.5, 1)])
    mesh = Mesh.from_arrays(ring, {"quad": [[0, 1, 2, 3]]})
    assert mesh.measures[0] == pytest.approx(0.5)
    tilted = np.column_stack([ring, ring @ (0.5, 0.25)])
    lifted = Mesh.from_arrays(tilted, {"quad": [[0, 1, 2, 3]]})
    assert lifted.measures[0] == pytest.approx(0.5 * np.sqrt(1 + 0.25 + 0.0625))
    assert lifted.centers[0][:2] == pytest.approx(mesh.centers[0])


def test_a_warped_quad_in_space_is_four_triangles():
    points = np.array([(0, 0, 0), (1, 0, 1), (1, 1, 0), (0, 1, 1)], float)
    mesh = Mesh.from_arrays(points, {"quad": [[0, 1, 2, 3]]})
    mean = points.mean(axis=0)
    areas = [
        np.linalg.norm(np.cross(points[i] - mean, points[(i + 1) % 4] - mean)) / 2 for i in range(4)
    ]
    assert mesh.measures[0] == pytest.approx(sum(areas))
    assert mesh.centers[0] == pytest.approx(mean)


@given(small_meshes(dim=3))
def test_polyhedra_with_faces_any_way_round_have_the_same_geometry(mesh):
    other = as_polyhedra(mesh)
    assert np.allclose(other.centers, mesh.centers, rtol=1e-12, atol=1e-12)
    assert np.allclose(other.signed_measures, mesh.measures, rtol=1e-12)


def test_a_polyhedron_that_is_not_star_shaped():
    # an L-shaped column whose corners' mean sees some faces from outside
    outline = np.array([(0, 0), (9, 0), (9, 1), (1, 1), (1, 9), (0, 9)], float)
    points = np.concatenate([np.column_stack([outline, np.full(6, h)]) for h in (0.0, 1.0)])
    sides = [[i, (i + 1) % 6, 6 + (i + 1) % 6, 6 + i] for i in range(6)]
    faces = [[0, 1, 2, 3, 4, 5], [6, 7, 8, 9, 10, 11], *sides]
    for turn in range(64):
        turned = [f[::-1] if turn >> i & 1 else f for i, f in enumerate(faces)]
        mesh = Mesh.from_arrays(points, {"polyhedron": [turned]})
        assert mesh.measures[0] == pytest.approx(17)
        assert mesh.centers[0] == pytest.approx((44.5 / 17, 44.5 / 17, 0.5))


def test_a_flat_cell_has_no_measure_and_the_mean_of_its_corners():
    mesh = Mesh.from_arrays(CUBE * (1, 1, 0), {"hexahedron": [np.arange(8)]})
    assert mesh.measures.tolist() == [0.0]
    assert mesh.centers.tolist() == [[0.5, 0.5, 0.0]]


def test_an_inverted_cell_has_a_negative_measure_and_its_centroid():
    mesh = Mesh.from_arrays(CUBE, {"hexahedron": [[4, 5, 6, 7, 0, 1, 2, 3]]})
    assert mesh.signed_measures.tolist() == [-1.0]
    assert mesh.measures.tolist() == [1.0]
    assert mesh.centers.tolist() == [[0.5, 0.5, 0.5]]


def test_a_tangled_cell_keeps_its_centre_in_its_box():
    rng = np.random.default_rng(11)
    for _ in range(200):
        points = rng.integers(0, 3, (8, 3)).astype(float)
        mesh = Mesh.from_arrays(points, {"hexahedron": [np.arange(8)]})
        assert np.all(mesh.centers[0] >= points.min(axis=0) - 1e-8)
        assert np.all(mesh.centers[0] <= points.max(axis=0) + 1e-8)


@given(small_meshes(), st.integers(-20, 20))
def test_powers_of_two_scale_exactly(mesh, power):
    scaled = Mesh.from_cells(mesh.points * 2.0**power, mesh.kind, mesh.indptr, mesh.indices)
    assert np.array_equal(scaled.centers, mesh.centers * 2.0**power)
    assert np.array_equal(scaled.measures, mesh.measures * 2.0 ** (power * mesh.dim))


@given(st.integers(0, 2**32 - 1))
def test_dyadic_translations_keep_measures_and_graph_bits(seed):
    rng = np.random.default_rng(seed)
    mesh = grid((3, 2, 2))
    points = mesh.points + rng.integers(-100, 100, mesh.points.shape) / 1024
    shift = rng.integers(-1000, 1000, 3) / 16
    here, there = (
        Mesh.from_cells(x, mesh.kind, mesh.indptr, mesh.indices) for x in (points, points + shift)
    )
    assert np.array_equal(here.measures, there.measures)


def test_measures_of_a_jittered_box_add_up():
    mesh = grid((5, 4, 3))
    inner = np.all((mesh.points > 0) & (mesh.points < (5, 4, 3)), axis=1)
    points = mesh.points + 0.2 * inner[:, None] * np.sin(37 * mesh.points)
    moved = Mesh.from_cells(points, mesh.kind, mesh.indptr, mesh.indices)
    assert moved.measures.sum() == pytest.approx(60, rel=1e-13)
    first_moment = (moved.centers * moved.measures[:, None]).sum(axis=0) / 60
    assert first_moment == pytest.approx((2.5, 2, 1.5), rel=1e-13)


def test_pixels_and_a_constant_third_coordinate_are_plane():
    points = np.array([(0, 0, 3), (2, 0, 3), (0, 1, 3), (2, 1, 3)], float)
    mesh = Mesh.from_arrays(points, {"pixel": [[0, 1, 2, 3]]})
    assert (mesh.dim, mesh.space_dim) == (2, 2)
    assert mesh.centers.tolist() == [[1.0, 0.5]]
    assert mesh.signed_measures.tolist() == [2.0]
