"""The survey of a mesh: figures, warnings, plain form."""

from __future__ import annotations

import json

import numpy as np
import pytest

from sfcpart.errors import MeshError
from sfcpart.graph import cell_graph
from sfcpart.measure.check import Offenders
from sfcpart.measure.survey import survey_mesh
from sfcpart.mesh.mesh import BoundaryGroup, Mesh
from tests.strategies import DEGENERATE, grid


def survey(mesh, **options):
    bare = mesh.points is None and mesh.faces is None
    return survey_mesh(mesh, None if bare else cell_graph(mesh), **options)


def test_a_sound_grid_has_no_warnings():
    mesh = grid((4, 3, 2))
    found = survey(mesh)
    assert found.warnings == ()
    assert (found.n_cells, found.n_points, found.dim, found.space_dim) == (24, 60, 3, 3)
    assert found.kinds == {"hexahedron": 24}
    assert (found.lowest, found.highest) == ((0, 0, 0), (4, 3, 2))
    assert found.n_inner_faces == 3 * 6 + 2 * 8 + 12
    assert found.n_boundary_faces == 2 * (12 + 8 + 6)
    assert found.boundary_measure == pytest.approx(52)
    assert found.component_size == (24,)
    assert (found.cracks.n_points, found.cracks.n_faces) == (0, 0)


def test_degenerate_meshes_can_be_surveyed_and_written_as_json(degenerate):
    found = survey(degenerate.mesh)
    again = json.loads(json.dumps(found.to_json_dict(), allow_nan=False))
    assert again["n_cells"] == degenerate.mesh.n_cells
    assert set(again) >= {"kinds", "cells", "alone", "cracks", "weight_fields", "split_memory"}


def test_islands_have_no_neighbours():
    found = survey(DEGENERATE["disconnected"]().mesh)
    assert found.alone == Offenders(3, (0, 1, 2))
    assert found.component_size == (1, 1, 1)
    assert any("no neighbour (0, 1, 2)" in text for text in found.warnings)
    assert any("3 unconnected pieces" in text for text in found.warnings)


def test_cracks_are_warned_of_and_the_tolerance_can_be_given():
    mesh = grid((2, 1))
    rows = np.asarray(mesh.indices).reshape(2, 4).copy()
    rows[1] += mesh.n_points
    torn = Mesh.from_arrays(
        np.concatenate([mesh.points, mesh.points + np.array([0, 1e-3])]), {"quad": rows}
    )
    assert survey(torn).cracks.n_faces == 0
    found = survey(torn, tolerance=0.01)
    assert found.cracks.n_faces == 1
    assert any("keep 1 pairs of faces apart: merge points" in text for text in found.warnings)
    with pytest.raises(MeshError, match="tolerance"):
        survey(torn, tolerance=-1)


def test_fields_usable_as_weights():
    mesh = grid((2, 1))
    fields = {
        "cost": [1.0, 2.0],
        "flag": [True, False],
        "column": [[1], [2]],
        "negative": [-1, 2],
        "bad": [np.nan, 1.0],
        "nothing": [0, 0],
        "velocity": [[1.0, 2.0], [3.0, 4.0]],
    }
    for name, values in fields.items():
        mesh = mesh.with_cell_field(name, values)
    found = survey(mesh)
    assert found.weight_fields == ("cost", "flag", "column")
    notes = {note.name: note for note in found.fields}
    assert notes["cost"].sum == 3.0 and notes["negative"].smallest == -1.0
    assert notes["bad"].sum is None and notes["velocity"].largest is None


def test_groups_are_listed_and_inverted_cells_warned_of():
    cube = grid((1, 1, 2))
    rows = np.asarray(cube.indices).reshape(2, 8).copy()
    rows[1] = rows[1][[4, 5, 6, 7, 0, 1, 2, 3]]
    wall = BoundaryGroup("wall", 5, np.array([9], np.uint8), np.array([0, 4]), np.arange(4))
    found = survey(Mesh.from_arrays(cube.points, {"hexahedron": rows}, boundary=[wall]))
    assert [(g.name, g.tag, g.n_elements) for g in found.boundary] == [("wall", 5, 1)]
    assert found.warnings == ("1 cell has a negative measure (1): inside out",)
