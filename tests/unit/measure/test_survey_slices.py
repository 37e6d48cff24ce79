"""The look-over of slices against that of the whole mesh."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import sfcpart
from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import MeshError
from sfcpart.graph import cell_graph
from sfcpart.measure.cracks import find_cracks
from sfcpart.measure.survey import survey_mesh, survey_slice
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.graph_slice import graph_slice
from sfcpart.slices.select import median
from tests.oracles.faces import cell_faces
from tests.sliced import all_bounds, bounds, on_slices
from tests.strategies import grid, small_meshes
from tests.unit.test_graph import SOLID_WIDTH, tangles
from tests.unit.test_weights import with_sides


def assert_same_survey(mesh, first, **options):
    has_faces = mesh.points is not None or mesh.faces is not None
    whole = survey_mesh(mesh, cell_graph(mesh) if has_faces else None, **options)

    def act(held):
        return survey_slice(held, graph_slice(held) if has_faces else None, **options)

    wanted = repr(whole.to_json_dict())
    for found in on_slices(mesh, first, act):
        assert repr(found.to_json_dict()) == wanted


@st.composite
def fielded(draw):
    mesh = draw(small_meshes())
    n = mesh.n_cells
    values = np.random.default_rng(draw(st.integers(0, 99))).normal(size=n)
    mesh = mesh.with_cell_field("signed", values).with_cell_field("whole", np.arange(n))
    mesh = mesh.with_cell_field("broken", np.where(np.arange(n) == n // 2, np.nan, 1.0))
    mesh = mesh.with_cell_field("vector", np.ones((n, 3)))
    return mesh, draw(bounds(n))


@settings(max_examples=15)
@given(fielded())
def test_grids_with_fields(case):
    assert_same_survey(*case)


@settings(max_examples=15)
@given(tangles({**SOLID_WIDTH, "polyhedron": 0}), st.data())
def test_tangles(mesh, data):
    assert_same_survey(mesh, data.draw(bounds(mesh.n_cells)), tolerance=0.2)


def test_degenerate_meshes(degenerate):
    for first in all_bounds(degenerate.mesh.n_cells):
        assert_same_survey(degenerate.mesh, first)


def test_boundary_groups_and_unused_points():
    mesh = with_sides((5, 4))
    far = np.concatenate([mesh.points, [[99.0, 99.0]]])
    quads = np.asarray(mesh.indices).reshape(-1, 4)
    mesh = Mesh.from_arrays(far, {"quad": quads}, boundary=mesh.boundary)
    assert survey_mesh(mesh, cell_graph(mesh)).n_unused_points == 1
    assert survey_mesh(mesh, cell_graph(mesh)).highest == (5.0, 4.0)
    for first in all_bounds(mesh.n_cells):
        assert_same_survey(mesh, first)


@st.composite
def torn(draw):
    """Tear a mesh along a random cut and move its two halves a little apart."""
    mesh = draw(small_meshes(max_side=3))
    if draw(st.booleans()) and mesh.dim == 3:
        cells = [[list(face) for face in faces] for faces in cell_faces(mesh)]
        mesh = Mesh.from_arrays(mesh.points, {"polyhedron": cells})
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    side = rng.random(mesh.n_cells) < 0.5
    n = mesh.n_points
    shift = draw(st.sampled_from([0.0, 1e-9]))
    points = np.concatenate([mesh.points, mesh.points + shift * np.min(np.abs(mesh.points).max(0))])
    if mesh.polyhedra is None:
        indices = np.array(mesh.indices)
        indices[np.repeat(side, np.diff(mesh.indptr))] += n
        return Mesh.from_cells(points, mesh.kind, mesh.indptr, indices)
    cells = [
        [[p + n * int(side[c]) for p in face] for face in faces]
        for c, faces in enumerate(cell_faces(mesh))
    ]
    return Mesh.from_arrays(points, {"polyhedron": cells})


@settings(max_examples=15)
@given(torn(), st.data())
def test_cracks(mesh, data):
    assert_same_survey(mesh, data.draw(bounds(mesh.n_cells)))


def test_large_cells_and_wrong_tolerances_are_refused_on_all_ranks():
    mesh = grid((3, 2))
    huge = np.array(mesh.points)
    huge[2, 0] = 1e200
    large = Mesh.from_arrays(huge, {"quad": np.asarray(mesh.indices).reshape(-1, 4)})

    def act(held):
        return survey_slice(held, graph_slice(held), tolerance=-1.0)

    with pytest.raises(MeshError, match="cell 1 is too large"):
        on_slices(large, [0, 1, 6], act)
    with pytest.raises(MeshError, match=r"tolerance is -1\.0"):
        on_slices(mesh, [0, 1, 6], act)


def test_points_in_one_place_coincide_on_any_ranks():
    mesh = Mesh.from_arrays(np.zeros((8, 2)), {"quad": [[0, 1, 2, 3], [4, 5, 6, 7]]})
    for first in ([0, 2], [0, 1, 2], [0, 0, 2, 2]):
        found = on_slices(mesh, first, lambda held: find_cracks(
            held, np.full(held.n_local, 4, np.int32), 0.0))  # fmt: skip
        assert {crack.n_points for crack in found} == {8}


@given(st.lists(st.floats(0, 1e300) | st.integers(0, 3).map(float), max_size=12), st.integers(1, 4))
def test_medians_are_those_of_numpy(values, size):
    values = np.array(values, float)
    wanted = np.median(values) if len(values) else np.nan
    found = run_ranks(size, lambda comm: median(values[comm.rank :: size], comm=comm))
    np.testing.assert_array_equal(found, [wanted] * size)
    assert repr(median(values, comm=SerialComm())) == repr(float(wanted))


def test_inspect_takes_slices():
    mesh = grid((3, 2))
    wanted = sfcpart.inspect(mesh).to_json_dict()
    found = on_slices(mesh, [0, 2, 6], lambda held: sfcpart.inspect(held).to_json_dict())
    assert found == [wanted, wanted]
