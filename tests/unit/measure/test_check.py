"""Faulty cells and points are found, sound ones are left in peace."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.graph import cell_graph
from sfcpart.measure.check import Offenders, check_cells, count_kinds, unused_points
from sfcpart.measure.cracks import find_cracks
from sfcpart.mesh.kinds import KINDS
from sfcpart.mesh.mesh import Mesh
from tests.oracles.faces import cell_faces
from tests.strategies import grid, small_meshes
from tests.unit.mesh.test_geometry import CUBE, REGULAR
from tests.unit.test_graph import as_polyhedra

NONE = Offenders(0, ())


def edges_by_hand(mesh):
    """List the lengths of each cell's edges."""
    lengths = []
    for faces in cell_faces(mesh):
        pairs = [(f[i - 1], f[i]) for f in faces for i in range(len(f))]
        lengths.append([float(np.linalg.norm(mesh.points[a] - mesh.points[b])) for a, b in pairs])
    return lengths


@given(small_meshes())
def test_sound_meshes_have_no_faults(mesh):
    check = check_cells(mesh)
    assert (check.no_measure, check.collapsed) == (NONE, NONE)
    lengths = edges_by_hand(mesh)
    stretch = [max(each) / min(each) for each in lengths]
    assert check.stretch["largest"] == pytest.approx(max(stretch))
    assert check.stretch["median"] == pytest.approx(np.median(stretch))
    assert stretch[check.most_stretched] == pytest.approx(max(stretch))
    assert check.shortest_edge == pytest.approx(min(min(each) for each in lengths))
    assert check.longest_edge == pytest.approx(max(max(each) for each in lengths))
    assert check.measure["sum"] == pytest.approx(mesh.measures.sum())


def test_polyhedra_and_polygons_have_edges_too():
    mesh = as_polyhedra(grid((2, 1, 1)))
    check = check_cells(mesh)
    assert check.stretch == {"median": 1.0, "largest": 1.0}
    ring = np.array([(0, 0), (4, 0), (4, 3), (0, 3)], float)
    assert check_cells(Mesh.from_arrays(ring, {"polygon": [[0, 1, 2, 3]]})).stretch[
        "largest"
    ] == pytest.approx(4 / 3)


@pytest.mark.parametrize("name", ["tetra", "hexahedron", "voxel", "pyramid"])
def test_inverted_solids_are_counted(name):
    good = np.array(REGULAR[name], float)
    points = np.concatenate([good, good * (1, 1, -1)])
    n = len(good)
    mesh = Mesh.from_arrays(points, {name: [np.arange(n), np.arange(n) + n]})
    assert check_cells(mesh).inverted == Offenders(1, (1,))
    assert check_cells(mesh).all_turned == ()
    alone = Mesh.from_arrays(points, {name: [np.arange(n) + n]})
    assert check_cells(alone).all_turned == (name,)


def test_wedges_and_plane_cells_are_inverted_against_most_of_their_kind():
    wedge = np.array(REGULAR["wedge"], float)
    points = np.concatenate([wedge * (1, 1, -1), wedge * (1, 1, -1) + 5, wedge + 9])
    mesh = Mesh.from_arrays(points, {"wedge": np.arange(18).reshape(3, 6)})
    assert check_cells(mesh).inverted == Offenders(1, (2,))
    plane = grid((3, 1))
    rows = np.asarray(plane.indices).reshape(3, 4)[:, ::-1]
    clockwise = Mesh.from_arrays(plane.points, {"quad": rows})
    assert check_cells(clockwise).inverted == NONE


def test_cells_without_measure_or_with_collapsed_edges():
    cells = {"hexahedron": [np.arange(8)]}
    flat = check_cells(Mesh.from_arrays(CUBE * (1, 1, 0), cells))
    assert flat.no_measure.count == flat.collapsed.count == 1
    assert flat.stretch is None and flat.most_stretched == -1
    thin = check_cells(Mesh.from_arrays(CUBE * (1, 1, 1e-8), cells))
    assert thin.no_measure == NONE
    assert thin.stretch["largest"] == pytest.approx(1e8)


def test_only_the_first_offenders_are_named():
    marked = np.ones(25, bool)
    marked[0] = False
    assert Offenders.of(marked) == Offenders(24, tuple(range(1, 11)))


def test_counts_and_unused_points():
    mesh = Mesh.from_arrays(
        [[0, 0], [1, 0], [1, 1], [0, 1], [5, 5], [2, 0], [2, 1]],
        [("triangle", [[0, 1, 2]]), ("quad", [[1, 5, 6, 2]]), ("triangle", [[0, 2, 3]])],
    )
    assert list(count_kinds(mesh).items()) == [("triangle", 2), ("quad", 1)]
    assert unused_points(mesh) == 1
    assert unused_points(Mesh.from_centers([[0, 0]])) == 0


@given(small_meshes(), st.integers(0, 2**32 - 1))
def test_cracks_are_the_faces_that_tearing_opened(mesh, seed):
    rng = np.random.default_rng(seed)
    side = rng.random(mesh.n_cells) < 0.5
    n = mesh.n_points
    indices = np.array(mesh.indices)
    indices[np.repeat(side, np.diff(mesh.indptr))] += n
    torn = Mesh.from_cells(
        np.concatenate([mesh.points, mesh.points]), mesh.kind, mesh.indptr, indices
    )
    graph = cell_graph(torn)
    cracks = find_cracks(torn, graph.boundary_count, 0.0)
    assert cracks.n_faces == cell_graph(mesh).n_faces - graph.n_faces
    assert cell_graph(torn.with_points_merged(0.0)).n_faces == graph.n_faces + cracks.n_faces


def test_cracks_between_polyhedra():
    mesh = grid((2, 1, 1))
    faces = cell_faces(mesh)
    away = [[p + mesh.n_points for p in face] for face in faces[1]]
    torn = Mesh.from_arrays(
        np.concatenate([mesh.points, mesh.points]), {"polyhedron": [faces[0], away]}
    )
    cracks = find_cracks(torn, cell_graph(torn).boundary_count, 1e-9)
    assert (cracks.n_points, cracks.n_faces) == (8, 1)


def test_every_kind_can_be_checked():
    for kind in KINDS.values():
        if kind.dim < 2 or not kind.n_nodes:
            continue
        points = np.random.default_rng(1).random((kind.n_nodes, 3))
        assert check_cells(Mesh.from_arrays(points, {kind.name: [range(kind.n_nodes)]})).stretch
