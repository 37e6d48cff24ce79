"""Meshes given by faces, in HDF5: they come back as they were; damage is our error."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import FileError, InputError, MeshError
from sfcpart.files.meshes.faces_file import read_faces, write_faces
from sfcpart.files.meshes.read import read_mesh
from sfcpart.mesh.mesh import Mesh

PAIRS = [[0, 1], [1, 2], [2, -1], [0, -1]]


def hanging() -> Mesh:
    centers = [[0.5, 1.0], [1.25, 0.75], [1.25, 1.25]]
    fields = {"work": np.arange(3), "flow": np.ones((3, 2), np.float32)}
    return Mesh.from_faces(
        PAIRS, [0.5, 0.5, 0.25, 2.0], centers, [2, 0.25, 0.25], cell_fields=fields
    )


def test_it_comes_back_as_it_was(tmp_path):
    path, mesh = tmp_path / "a.h5", hanging()
    write_faces(path, mesh)
    found = read_mesh(path)
    np.testing.assert_array_equal(found.faces.cell, PAIRS)
    np.testing.assert_array_equal(found.faces.measure, mesh.faces.measure)
    np.testing.assert_array_equal(found.centers, mesh.centers)
    np.testing.assert_array_equal(found.measures, mesh.measures)
    assert found.cell_fields["work"].tolist() == [0, 1, 2]
    assert found.cell_fields["flow"].dtype == np.float32


def test_meshes_not_given_by_faces_are_refused(tmp_path):
    with pytest.raises(InputError, match="not given by faces"):
        write_faces(tmp_path / "a.h5", Mesh.from_centers([[0.0, 0], [1, 1]]))
    assert not (tmp_path / "a.h5").exists()


def test_damage_is_one_clear_line(tmp_path):
    import h5py

    path = tmp_path / "a.h5"
    write_faces(path, hanging())
    with h5py.File(path, "r+") as file:
        file["faces_mesh/face_cell"][1] = [1, 9]
    with pytest.raises(MeshError, match="a.h5: .*9"):
        read_mesh(path)
    with h5py.File(path, "r+") as file:
        del file["faces_mesh/cell_measure"]
    with pytest.raises(FileError, match="faces_mesh/cell_measure is missing"):
        read_mesh(path)
    with h5py.File(path, "r+") as file:
        file["faces_mesh"].attrs["layout"] = 2
    with pytest.raises(FileError, match="layout 2; wanted 1"):
        read_faces(path)
    with h5py.File(path, "r+") as file:
        del file["faces_mesh"]
    with pytest.raises(FileError, match="no group faces_mesh"):
        read_faces(path)
