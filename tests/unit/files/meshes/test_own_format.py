"""A field of parts in a copy of the input, in its own format: everything else stays."""

from __future__ import annotations

import meshio
import numpy as np
import pytest

from sfcpart.errors import FileError, InputError
from sfcpart.files.hdf5 import create_hdf5, read_hdf5
from sfcpart.files.meshes.faces_file import write_faces
from sfcpart.files.meshes.own_format import write_in_own_format
from sfcpart.files.meshes.read import read_mesh
from sfcpart.mesh.mesh import Mesh
from tests.file_samples import write_shell, write_tets

ENDINGS = {"vtu": ".vtu", "vtk": ".vtk", "gmsh22": ".msh", "xdmf": ".xdmf"}


@pytest.mark.parametrize("file_format", ["vtu", "vtk", "gmsh22", "xdmf"])
def test_a_field_is_added_in_the_format_of_the_file(tmp_path, file_format):
    source = tmp_path / f"a{ENDINGS[file_format]}"
    write_tets(source, file_format)
    given = read_mesh(source)
    target = tmp_path / f"parts{source.suffix}"
    part = np.array([2, 0, 1, 1, 0, 2], np.int32)
    write_in_own_format(target, source, {"part": part})
    mesh = read_mesh(target)
    assert mesh.cell_fields["part"].tolist() == part.tolist()
    np.testing.assert_array_equal(mesh.indices, given.indices)
    np.testing.assert_array_equal(mesh.points, given.points)
    assert [g.name for g in mesh.boundary] == [g.name for g in given.boundary]
    assert set(given.cell_fields) <= set(mesh.cell_fields)
    assert {p.name for p in tmp_path.iterdir()} - {"a.h5"} == {source.name, target.name}


def test_formats_that_cannot_carry_fields_are_refused(tmp_path):
    source = tmp_path / "a.stl"
    write_shell(source, "stl")
    with pytest.raises(FileError, match=r"\(stl\) cannot carry fields of cells; write"):
        write_in_own_format(tmp_path / "b.stl", source, {"part": np.zeros(4, int)})
    assert not (tmp_path / "b.stl").exists()


def test_a_failed_write_leaves_the_old_file(tmp_path, monkeypatch):
    source = tmp_path / "a.vtu"
    write_tets(source, "vtu")
    before = source.read_bytes()
    with pytest.raises(InputError, match=r"wanted 6 integers"):
        write_in_own_format(source, source, {"part": np.zeros(5, int)})

    def full(*_args, **_options):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(meshio, "write", full)
    with pytest.raises(FileError, match="No space left"):
        write_in_own_format(source, source, {"part": np.zeros(6, int)})
    assert source.read_bytes() == before
    assert [p.name for p in tmp_path.iterdir()] == ["a.vtu"]


def write_vtkhdf_of_steps(path):
    """Write two time steps: a triangle; then a triangle, its ghost copy, an edge, a quadrilateral.

    The field offsets of `heat` make its second step lie where no other field has it.
    """
    corners = np.array([[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 1, 0]], float)
    arrays = {
        "NumberOfPoints": [4, 5],
        "NumberOfCells": [1, 4],
        "NumberOfConnectivityIds": [3, 12],
        "Points": corners[[0, 1, 2, 3, 0, 1, 2, 3, 4]],
        "Connectivity": [0, 1, 2, 1, 4, 2, 1, 4, 2, 0, 1, 0, 1, 2, 3],
        "Offsets": [0, 3, 0, 3, 6, 8, 12],
        "Types": np.array([5, 5, 5, 3, 9], np.uint8),
        "CellData/vtkGhostType": np.array([0, 0, 1, 0, 0], np.uint8),
        "CellData/heat": [0.0, 1.0, 2.0, 3.0, 4.0],
        "Steps/Values": [0.0, 1.0],
        "Steps/PartOffsets": [0, 1],
        "Steps/NumberOfParts": [1, 1],
        "Steps/PointOffsets": [0, 4],
        "Steps/CellOffsets": [0, 1],
        "Steps/ConnectivityIdOffsets": [0, 3],
        "Steps/CellDataOffsets/heat": [0, 1],
    }
    with create_hdf5(path) as file:
        group = file.create_group("VTKHDF")
        group.attrs["Version"] = [2, 2]
        group.attrs.create("Type", np.bytes_("UnstructuredGrid"))
        for name, values in arrays.items():
            group.create_dataset(name, data=np.asarray(values))
        group["Steps"].attrs["NSteps"] = 2


def test_ghosts_edges_and_earlier_steps_of_vtkhdf_get_no_part(tmp_path):
    source, target = tmp_path / "a.vtkhdf", tmp_path / "b.vtkhdf"
    write_vtkhdf_of_steps(source)
    given = read_mesh(source)
    assert given.kind.tolist() == [5, 9]
    write_in_own_format(target, source, {"part": np.array([7, 3])})
    mesh = read_mesh(target)
    assert mesh.cell_fields["part"].tolist() == [7, 3]
    assert mesh.cell_fields["heat"].tolist() == [1.0, 4.0]
    np.testing.assert_array_equal(mesh.points, given.points)
    with read_hdf5(target) as file:
        assert file["VTKHDF/CellData/part"][:].tolist() == [-1, 7, -1, -1, 3]
        assert file["VTKHDF/Steps/CellDataOffsets/part"][:].tolist() == [0, 1]
        assert file["VTKHDF/Steps"].attrs["NSteps"] == 2


def test_polyhedra_keep_their_faces_and_a_second_split_replaces_the_first(root, tmp_path):
    source, target = root / "meshes" / "kelvin_cells.vtkhdf", tmp_path / "b.vtkhdf"
    given = read_mesh(source)
    for part in (np.arange(given.n_cells) % 5, np.arange(given.n_cells) // 9):
        write_in_own_format(target, source, {"part": part})
        source = target
        mesh = read_mesh(target)
        assert mesh.cell_fields["part"].tolist() == part.tolist()
    np.testing.assert_array_equal(mesh.polyhedra.face_indices, given.polyhedra.face_indices)
    np.testing.assert_array_equal(mesh.indices, given.indices)


def test_files_of_faces_carry_the_field_too(tmp_path):
    source, target = tmp_path / "a.h5", tmp_path / "b.h5"
    write_faces(
        source,
        Mesh.from_faces(
            [[0, 1], [1, 2], [2, -1]], [2.0, 1.0, 1.0], [[0, 0], [1, 0], [2, 0]], [1.0, 1.0, 2.0],
            cell_fields={"work": [1.5, 2.0, 1.0]},
        ),
    )  # fmt: skip
    write_in_own_format(target, source, {"part": np.array([0, 1, 1])})
    mesh = read_mesh(target)
    assert mesh.cell_fields["part"].tolist() == [0, 1, 1]
    assert mesh.cell_fields["work"].tolist() == [1.5, 2.0, 1.0]
    assert mesh.faces.cell.tolist() == [[0, 1], [1, 2], [2, -1]]


@pytest.mark.parametrize("name", ["a.vtkhdf", "a.h5"])
def test_a_field_of_another_length_changes_nothing(root, tmp_path, name):
    source = tmp_path / name
    if name == "a.h5":
        write_faces(source, Mesh.from_faces([[0, 1]], [1.0], [[0, 0], [1, 0]], [1.0, 1.0]))
    else:
        write_vtkhdf_of_steps(source)
    before = source.read_bytes()
    with pytest.raises(InputError, match="wanted 2 integers"):
        write_in_own_format(source, source, {"part": np.zeros(5, int)})
    assert source.read_bytes() == before
    assert [entry.name for entry in tmp_path.iterdir()] == [name]
