"""Legacy VTK: what vtk writes comes back, in every version and mode; damage is our error."""

from __future__ import annotations

import numpy as np
import pytest
import vtk
from vtk.util.numpy_support import numpy_to_vtk

from sfcpart.errors import FileError, InsufficientMemoryError, MeshError
from sfcpart.files.meshes.read import read_mesh
from tests.file_samples import assert_is_sample, vtk_grid


def write(path, data, *, version=51, binary=True, writer=None):
    writer = writer or vtk.vtkUnstructuredGridWriter()
    writer.SetInputData(data)
    writer.SetFileName(str(path))
    writer.SetFileVersion(version)
    (writer.SetFileTypeToBinary if binary else writer.SetFileTypeToASCII)()
    assert writer.Write()
    return path


MODES = [(version, binary) for version in (42, 51) for binary in (True, False)]


@pytest.mark.parametrize(("version", "binary"), MODES)
def test_mixed_kinds_polyhedra_and_fields_come_back(tmp_path, version, binary):
    assert_is_sample(
        read_mesh(write(tmp_path / "a.vtk", vtk_grid(), version=version, binary=binary))
    )


@pytest.mark.parametrize(("version", "binary"), MODES)
def test_polygons_keep_order_and_fields(tmp_path, version, binary):
    polygons = ((5, (0, 1, 2)), (7, (0, 1, 2, 3, 4)), (5, (1, 2, 3)), (7, (3, 4, 5, 6, 7, 8)))
    mesh = read_mesh(write(tmp_path / "a.vtk", vtk_grid(polygons), version=version, binary=binary))
    assert mesh.kind.tolist() == [5, 7, 5, 7]
    assert np.diff(mesh.indptr).tolist() == [3, 5, 3, 6]
    assert mesh.cell_fields["id"].tolist() == [0, 1, 2, 3]


@pytest.mark.parametrize(("version", "binary"), MODES)
def test_polygonal_data_become_cells(tmp_path, version, binary):
    source = vtk.vtkCubeSource()
    source.Update()
    path = tmp_path / "a.vtk"
    cube = source.GetOutput()
    write(path, cube, version=version, binary=binary, writer=vtk.vtkPolyDataWriter())
    mesh = read_mesh(path)
    assert mesh.kind.tolist() == [9] * 6
    assert mesh.measures.sum() == pytest.approx(6.0)
    assert mesh.point_fields["Normals"].shape == (24, 3)


@pytest.mark.parametrize("binary", [True, False])
def test_structured_grids_become_hexahedra_or_quads(tmp_path, binary):
    image = vtk.vtkImageData()
    image.SetDimensions(3, 4, 5)
    image.SetSpacing(0.5, 1, 2)
    path = tmp_path / "a.vtk"
    write(path, image, binary=binary, writer=vtk.vtkStructuredPointsWriter())
    mesh = read_mesh(path)
    assert (mesh.n_cells, set(mesh.kind.tolist())) == (24, {12})
    assert mesh.signed_measures.tolist() == pytest.approx([1.0] * 24)
    flat = vtk.vtkRectilinearGrid()
    flat.SetDimensions(3, 1, 5)
    for axis, n in (("X", 3), ("Y", 1), ("Z", 5)):
        getattr(flat, f"Set{axis}Coordinates")(numpy_to_vtk(np.arange(n) ** 2.0, deep=1))
    write(path, flat, binary=binary, writer=vtk.vtkRectilinearGridWriter())
    mesh = read_mesh(path)
    assert (mesh.n_cells, set(mesh.kind.tolist())) == (8, {9})
    assert mesh.measures.sum() == pytest.approx(64.0)
    centers = mesh.centers  # VTK numbers cells with the first axis fastest
    assert centers[:3, 0].tolist() == [0.5, 2.5, 0.5]


HEAD = "# vtk DataFile Version 3.0\na\nASCII\n"
TRIANGLE = HEAD + (
    "DATASET UNSTRUCTURED_GRID\nPOINTS 3 float\n0 0 0 1 0 0 0 1 0\n"
    "CELLS 1 4\n3 0 1 2\nCELL_TYPES 1\n5\n"
)


def read_text(tmp_path, text):
    path = tmp_path / "a.vtk"
    path.write_text(text)
    return read_mesh(path)


def test_fields_of_all_sorts_are_read(tmp_path):
    text = TRIANGLE + (
        "CELL_DATA 1\nSCALARS work float\nLOOKUP_TABLE default\n2.5\n"
        "VECTORS flow double\n1 2 3\nFIELD more 2\na%20b 1 1 int\n7\nc 2 1 float\n1 2\n"
        "POINT_DATA 3\nSCALARS depth int 1\n4 5 6\n"
    )
    mesh = read_text(tmp_path, text)
    assert mesh.cell_fields["work"].tolist() == [2.5]
    assert mesh.cell_fields["flow"].tolist() == [[1, 2, 3]]
    assert mesh.cell_fields["a b"].tolist() == [7]
    assert mesh.cell_fields["c"].tolist() == [[1, 2]]
    assert mesh.point_fields["depth"].tolist() == [4, 5, 6]


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("POINTS 3", "POINTS 300", "300|900"),
        ("POINTS 3", "POINTS three", "no count"),
        ("float", "tensor", "unknown type 'tensor'"),
        ("CELL_TYPES 1\n5\n", "", "no CELLS or no CELL_TYPES"),
        ("CELLS 1 4\n3", "CELLS 1 4\n2", "do not fit"),
        ("CELLS 1", "CELLS 2", "2 cells, but 1 cell types"),
        ("CELLS", "SELLS", "unknown section 'SELLS'"),
        ("ASCII", "ASCIJ", "neither ASCII nor BINARY"),
        ("UNSTRUCTURED_GRID", "BLOB", "dataset BLOB"),
    ],
)
def test_damage_is_one_clear_line(tmp_path, old, new, words):
    assert old in TRIANGLE
    with pytest.raises(FileError, match=words) as error:
        read_text(tmp_path, TRIANGLE.replace(old, new))
    assert "\n" not in str(error.value)
    assert str(error.value).count("a.vtk: ") == 1


def test_ids_out_of_range_and_unknown_kinds_are_named(tmp_path):
    with pytest.raises(MeshError, match=r"a\.vtk: .*point"):
        read_text(tmp_path, TRIANGLE.replace("3 0 1 2", "3 0 1 9"))
    with pytest.raises(MeshError, match="1 of VTK type 6"):
        read_text(tmp_path, TRIANGLE.replace("CELL_TYPES 1\n5", "CELL_TYPES 1\n6"))


def test_a_grid_of_any_claimed_size_takes_no_memory(tmp_path):
    text = HEAD + "DATASET STRUCTURED_POINTS\nDIMENSIONS 90000 90000 90000\n"
    with pytest.raises(InsufficientMemoryError, match="MB"):
        read_text(tmp_path, text + "ORIGIN 0 0 0\nSPACING 1 1 1\n")
