"""VTU and PVTU: every storage vtk can write comes back in file order; damage is our error."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
import vtk

from sfcpart.errors import FileError, MeshError
from sfcpart.files.meshes.read import read_mesh
from sfcpart.mesh.mesh import Mesh
from tests.file_samples import MIXED, assert_is_sample, points, vtk_grid, write_tets


def write(path, grid, *, mode="Appended", raw=True, compressor="ZLib", wide=False, big=False):
    writer = vtk.vtkXMLUnstructuredGridWriter()
    writer.SetInputData(grid)
    writer.SetFileName(str(path))
    getattr(writer, f"SetDataModeTo{mode}")()
    writer.SetEncodeAppendedData(not raw)
    getattr(writer, f"SetCompressorTypeTo{compressor}")()
    writer.SetBlockSize(64)
    getattr(writer, f"SetHeaderTypeToUInt{64 if wide else 32}")()
    getattr(writer, f"SetByteOrderTo{'Big' if big else 'Little'}Endian")()
    assert writer.Write()
    return path


@pytest.mark.parametrize(
    ("mode", "raw", "compressor", "wide", "big"),
    [
        ("Ascii", 0, "None", 0, 0),
        *itertools.product(
            ["Binary", "Appended"], [0, 1], ["None", "ZLib", "LZMA"], [0, 1], [0, 1]
        ),
    ],
)
def test_every_storage_of_vtk_comes_back(tmp_path, mode, raw, compressor, wide, big):
    path = tmp_path / "a.vtu"
    write(path, vtk_grid(), mode=mode, raw=raw, compressor=compressor, wide=wide, big=big)
    mesh = read_mesh(path)
    assert_is_sample(mesh)
    np.testing.assert_allclose(mesh.points, points(), rtol=1e-6 if mode == "Ascii" else 0)


def test_older_face_streams_of_polyhedra_are_read(tmp_path):
    # the cube of file_samples as meshio (and VTK before 9.4) store polyhedra
    import meshio

    from tests.file_samples import CUBE_FACES

    path = tmp_path / "a.vtu"
    corners = np.array([[x, y, z] for z in (0, 1) for x, y in ((0, 0), (1, 0), (1, 1), (0, 1))])
    cube = [[np.array(face) for face in CUBE_FACES]]
    meshio.Mesh(corners.astype(float), [("polyhedron8", cube)]).write(path)
    mesh = read_mesh(path)
    assert mesh.kind.tolist() == [42]
    assert mesh.measures.tolist() == pytest.approx([1.0])


def piece(x: float, gids, ghost=None):
    grid = vtk_grid(((12, tuple(range(8))), (12, (1, 8, 9, 2, 5, 10, 11, 6))))
    places = vtk.vtkPoints()
    square = [(x, 0), (x + 1, 0), (x + 1, 1), (x, 1)]
    ends = [(x + 2, 0), (x + 2, 1)]
    for places_of_kind in (square, ends):
        for z in (0, 1):
            for a, b in places_of_kind:
                places.InsertNextPoint(a, b, z)
    grid.SetPoints(places)
    grid.GetPointData().Initialize()
    for data, name, values in (
        (grid.GetPointData(), "GlobalPointIds", gids),
        (grid.GetCellData(), "vtkGhostType", ghost),
    ):
        if values is not None:
            array = vtk.vtkIdTypeArray() if name != "vtkGhostType" else vtk.vtkUnsignedCharArray()
            array.SetName(name)
            for value in values:
                array.InsertNextValue(value)
            data.AddArray(array)
    return grid


LEFT = [0, 1, 5, 4, 8, 9, 13, 12, 2, 6, 10, 14]
RIGHT = [1, 2, 6, 5, 9, 10, 14, 13, 3, 7, 11, 15]


def write_pvtu(tmp_path, pieces):
    for i, grid in enumerate(pieces):
        write(tmp_path / f"part{i}.vtu", grid)
    sources = "".join(f'<Piece Source="part{i}.vtu"/>' for i in range(len(pieces)))
    path = tmp_path / "all.pvtu"
    path.write_text(
        '<VTKFile type="PUnstructuredGrid" version="0.1"><PUnstructuredGrid GhostLevel="1">'
        f"{sources}</PUnstructuredGrid></VTKFile>"
    )
    return path


def test_pieces_are_joined_by_global_ids_and_ghosts_counted_once(tmp_path):
    pieces = [piece(0.0, LEFT, ghost=[0, 1]), piece(1.0, RIGHT, ghost=[0, 0])]
    mesh = read_mesh(write_pvtu(tmp_path, pieces))
    assert mesh.n_cells == 3
    assert mesh.n_points == 16
    assert mesh.points[5].tolist() == [1, 1, 0]
    assert mesh.measures.sum() == pytest.approx(3.0)
    assert "vtkGhostType" not in mesh.cell_fields


def test_pieces_without_global_ids_keep_their_points(tmp_path):
    mesh = read_mesh(write_pvtu(tmp_path, [piece(0.0, None), piece(2.0, None)]))
    assert (mesh.n_cells, mesh.n_points) == (4, 24)
    assert mesh.centers[:, 0].tolist() == pytest.approx([0.5, 1.5, 2.5, 3.5])


def test_one_global_id_at_two_places_is_refused(tmp_path):
    path = write_pvtu(tmp_path, [piece(0.0, LEFT), piece(5.0, RIGHT)])
    with pytest.raises(MeshError, match="share global id 1"):
        read_mesh(path)


def test_a_missing_piece_is_named(tmp_path):
    path = write_pvtu(tmp_path, [piece(0.0, LEFT), piece(1.0, RIGHT)])
    (tmp_path / "part1.vtu").unlink()
    with pytest.raises(FileError, match=r"1 of its pieces are missing, first part1\.vtu"):
        read_mesh(path)


def test_several_pieces_in_one_file_are_all_read(tmp_path):
    one = '<Piece NumberOfPoints="3" NumberOfCells="1"><Points><DataArray type="Float64" '
    one += 'NumberOfComponents="3">{x} 0 0 {y} 0 0 {x} 1 0</DataArray></Points><Cells>'
    one += '<DataArray type="Int32" Name="connectivity">0 1 2</DataArray>'
    one += '<DataArray type="Int32" Name="offsets">3</DataArray>'
    one += '<DataArray type="UInt8" Name="types">5</DataArray></Cells></Piece>'
    path = tmp_path / "a.vtu"
    path.write_text(
        '<VTKFile type="UnstructuredGrid"><UnstructuredGrid>'
        + one.format(x=0, y=1)
        + one.format(x=4, y=6)
        + "</UnstructuredGrid></VTKFile>"
    )
    mesh = read_mesh(path)
    assert mesh.measures.tolist() == [0.5, 1.0]
    path.write_text(path.read_text().replace("0 1 2", "0 1 -1", 1))
    with pytest.raises(MeshError, match="element 0 names point -1"):
        read_mesh(path)


def test_other_vtk_types_and_packers_are_refused_clearly(tmp_path):
    path = tmp_path / "a.vtu"
    path.write_text('<VTKFile type="ImageData"><ImageData/></VTKFile>')
    with pytest.raises(FileError, match="VTK of type ImageData; wanted UnstructuredGrid"):
        read_mesh(path)
    write(path, vtk_grid(MIXED), compressor="LZ4")
    with pytest.raises(FileError, match="vtkLZ4DataCompressor.*write it with zlib"):
        read_mesh(path)


@pytest.mark.parametrize("keep", [0.2, 0.6, 0.95])
@pytest.mark.parametrize(("mode", "raw"), [("Ascii", 0), ("Binary", 0), ("Appended", 1)])
def test_files_cut_short_are_refused(tmp_path, keep, mode, raw):
    path = write(tmp_path / "a.vtu", vtk_grid(), mode=mode, raw=raw)
    content = path.read_bytes()
    path.write_bytes(content[: int(keep * len(content))])
    with pytest.raises(FileError, match="cut short|damaged"):
        read_mesh(path)


def test_a_claimed_size_is_checked_before_memory_is_taken(tmp_path):
    path = write(tmp_path / "a.vtu", vtk_grid(), compressor="ZLib")
    content = bytearray(path.read_bytes())
    at = content.find(b"_", content.find(b"<AppendedData")) + 1
    content[at + 4 : at + 8] = b"\xff\xff\xff\x7f"  # the size of a block: 2 GB
    path.write_bytes(content)
    with pytest.raises(FileError, match="claims|wanted"):
        read_mesh(path)


def test_files_of_meshio_are_read(tmp_path):
    path = tmp_path / "a.vtu"
    for options in ({}, {"compression": None}, {"compression": "lzma"}, {"binary": False}):
        write_tets(path, "vtu", **options)
        mesh = read_mesh(path)
        assert isinstance(mesh, Mesh)
        assert mesh.cell_fields["work"].tolist() == list(range(6))
        assert mesh.measures.sum() == pytest.approx(1.0)
