"""File names that are no text, and folders and options that hold less than is wanted."""

from __future__ import annotations

import json
import os
import shutil
from pathlib import Path

import meshio
import numpy as np
import pytest

import sfcpart as api
from sfcpart.errors import FileError, MeshError
from sfcpart.mesh.shapes import lattice


def test_names_that_are_no_utf8_pass_through_summary_and_picture(sfcpart, meshes):
    name = os.fsdecode(b"bad$\xff$.vtu")
    shutil.copy(meshes / "turbine.vtu", name)
    code, out, err = sfcpart(f"split {name!s} -n 2 -o parts --picture")
    assert (code, err) == (0, "")
    summary = json.loads(Path("parts/summary.json").read_text(encoding="utf-8"))
    assert summary["input"]["path"].endswith(name)
    code, out, _ = sfcpart(f"split {name!s} -n 2 --json")
    assert json.loads(out)["mesh"] == name


def test_a_folder_of_pieces_can_be_assessed_but_not_loaded_by_a_solver(sfcpart):
    sfcpart("split meshes/turbine.vtu -n 3 -o parts -q --format vtu")
    by_folder = sfcpart("assess meshes/turbine.vtu parts --json").out
    by_file = sfcpart("assess meshes/turbine.vtu parts/cell_part.npy --json").out
    assert by_folder == by_file
    with pytest.raises(
        FileError, match="holds no parts.vtkhdf; split again with the format vtkhdf"
    ):
        api.read_part("parts", 0)
    Path("bare").mkdir()
    with pytest.raises(FileError, match="wanted a folder that a split wrote"):
        api.read_part("bare", 0)


def test_a_msh_file_that_is_not_gmsh_is_told_apart(sfcpart):
    points = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]], float)
    mesh = meshio.Mesh(points, {"triangle": np.array([[0, 1, 2], [0, 2, 3]])})
    mesh.write("two.msh", file_format="ansys")
    assert sfcpart("split two.msh -n 2").code == 0
    code, _, err = sfcpart("split two.msh -n 2 -o parts --format same")
    assert code == 4
    assert "its format (ansys) cannot carry fields of cells; write vtkhdf or vtu instead" in err


def test_an_empty_name_is_no_file_to_write(sfcpart):
    np.save("parts.npy", np.zeros(2784, int))
    for option in ("--csv", "--picture"):
        code, _, err = sfcpart(f"assess meshes/channel_mixed.vtu parts.npy {option} ''")
        assert code == 4
        assert "cannot be written" in err


def test_a_tolerance_that_swallows_cells_is_refused(sfcpart):
    with pytest.raises(MeshError, match="a tolerance of 5 makes cell 0 a single point"):
        lattice((2, 2)).to_mesh().with_points_merged(5.0)
    assert sfcpart("split meshes/turbine.vtu -n 2 --merge-points 1e9").code == 3


@pytest.mark.parametrize("size", [1e160, 1e300])
def test_cells_too_large_to_be_measured_are_refused(size):
    points = size * np.array([[0, 0], [1, 0], [0, 1], [1e-200, 1e-200], [0, 2e-200]])
    mesh = api.Mesh.from_arrays(points, {"triangle": [[0, 3, 4], [0, 1, 2]]})
    with pytest.raises(MeshError, match=r"cell \d is too large to be measured"):
        api.inspect(mesh)
