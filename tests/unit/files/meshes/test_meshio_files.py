"""meshio's formats: tags and names are kept, its traps are guarded, fields can be added."""

from __future__ import annotations

import sys
import time

import meshio
import numpy as np
import pytest

from sfcpart.errors import FileError, MeshError
from sfcpart.files.meshes import limits, meshio_files
from sfcpart.files.meshes.meshio_blocks import raw_of_meshio
from sfcpart.files.meshes.read import read_mesh
from tests.file_samples import tet_block, write_tets, write_ugrid

FORMATS = {
    "gmsh": "a.msh",
    "gmsh22": "a.msh",
    "medit": "a.mesh",
    "ugrid": "a.b8.ugrid",
    "xdmf": "a.xdmf",
    "vtk": "a.vtk",
    "vtu": "a.vtu",
    "abaqus": "a.inp",
    "nastran": "a.bdf",
    "avsucd": "a.avs",
    "hmf": "a.hmf",
    "med": "a.med",
}


def write_hexahedra(path, file_format):
    corners = np.array([[x, y, z] for z in (0, 1) for y in (0, 1) for x in range(4)], float)
    first = np.arange(3)
    cells = np.column_stack([first + k for k in (0, 1, 5, 4, 8, 9, 13, 12)])
    meshio.Mesh(corners, [("hexahedron", cells)]).write(path, file_format=file_format)


@pytest.mark.parametrize("file_format", FORMATS)
def test_hexahedra_come_back_through_every_format(tmp_path, file_format):
    path = tmp_path / FORMATS[file_format]
    write_hexahedra(path, file_format)
    mesh = read_mesh(path)
    assert mesh.kind.tolist() == [12, 12, 12]
    np.testing.assert_allclose(mesh.signed_measures, 1.0)
    assert mesh.centers[:, 0].tolist() == pytest.approx([0.5, 1.5, 2.5])


@pytest.mark.parametrize(
    ("file_format", "groups"),
    [
        ("medit", [("medit:ref=1", 1, 2), ("medit:ref=2", 2, 2)]),
        ("ugrid", [("ugrid:ref=1", 1, 2), ("ugrid:ref=2", 2, 2)]),
        ("gmsh22", [("bed", 1, 2), ("gmsh:physical=2", 2, 2)]),
        ("xdmf", [("surfaces", -1, 4)]),
        ("vtk", [("surfaces", -1, 4)]),
    ],
)
def test_boundary_groups_keep_names_and_tags(tmp_path, file_format, groups):
    path = tmp_path / FORMATS[file_format]
    write_ugrid(path) if file_format == "ugrid" else write_tets(path, file_format)
    mesh = read_mesh(path)
    assert [(g.name, g.tag, len(g.kind)) for g in mesh.boundary] == groups
    assert mesh.n_cells == 6
    np.testing.assert_array_equal(mesh.indices.reshape(6, 4), tet_block()[1])
    _, _, triangles = tet_block()
    found = np.concatenate([g.indices.reshape(-1, 3) for g in mesh.boundary])
    np.testing.assert_array_equal(found, triangles)


GMSH_41 = """$MeshFormat
4.1 0 8
$EndMeshFormat
$PhysicalNames
3
1 1 "bed"
2 5 "water"
2 6 "layers"
$EndPhysicalNames
$Entities
0 2 2 0
1 0 0 0 1 0 0 1 1 0
2 0 0 0 1 0 0 1 2 0
1 0 0 0 1 1 0 1 5 0
2 1 0 0 2 1 0 2 5 6 0
$EndEntities
$Nodes
1 6 1 12
2 1 0 6
1
2
3
4
10
12
0 0 0
1 0 0
1 1 0
0 1 0
2 0 0
2 1 0
$EndNodes
$Elements
4 5 1 9
1 1 1 1
1 1 2
1 2 1 1
2 2 10
2 1 2 2
3 1 2 3
4 1 3 4
2 2 3 1
9 2 10 12 3
$EndElements
"""


def test_physical_names_of_gmsh_41_name_groups_and_regions(tmp_path):
    path = tmp_path / "a.msh"
    path.write_text(GMSH_41)
    mesh = read_mesh(path)
    assert mesh.indices.tolist() == [0, 1, 2, 0, 2, 3, 1, 4, 5, 2]
    assert [(g.name, g.tag, g.indices.tolist()) for g in mesh.boundary] == [
        ("bed", 1, [0, 1]),
        ("gmsh:physical=2", 2, [1, 4]),
    ]
    assert mesh.cell_fields["gmsh:physical"].tolist() == [5, 5, 5]
    assert mesh.cell_fields["set:water"].tolist() == [1, 1, 1]  # one surface is of two groups
    assert mesh.cell_fields["set:layers"].tolist() == [0, 0, 1]


def test_named_sets_become_groups_and_fields():
    corners, tets, triangles = tet_block()
    sets = {"rock": [[0, 2], []], "bed": [[], [1, 3]]}
    sets = {name: [np.array(part, int) for part in parts] for name, parts in sets.items()}
    mesh = meshio.Mesh(corners, [("tetra", tets), ("triangle", triangles)], cell_sets=sets)
    found = read_mesh_of(mesh)
    assert found.cell_fields["set:rock"].tolist() == [1, 0, 1, 0, 0, 0]
    assert [(g.name, len(g.kind)) for g in found.boundary] == [("bed", 2), ("surfaces", 2)]
    assert "set:bed" not in found.cell_fields


def read_mesh_of(mesh):
    from sfcpart.files.meshes.assemble import build_mesh

    return build_mesh(raw_of_meshio(mesh), "given")


def test_blocks_keep_the_order_of_the_file():
    corners, tets, _ = tet_block()
    cube = np.array([[0, 1, 3, 2, 4, 5, 7, 6]])
    blocks = [("tetra", tets[:1]), ("hexahedron", cube), ("tetra", tets[1:3]), ("line", [[0, 1]])]
    fields = {"id": [np.array([0]), np.array([1]), np.array([2, 3]), np.array([4])]}
    mesh = read_mesh_of(meshio.Mesh(corners, blocks, cell_data=fields))
    assert mesh.kind.tolist() == [10, 12, 10, 10]
    assert mesh.cell_fields["id"].tolist() == [0, 1, 2, 3]


def test_wedges_are_the_same_way_round_as_other_cells():
    """A wedge as meshio keeps it, whose base points inward, is not inverted."""
    corners = np.array([[x, y, z] for z in (0, 1) for x, y in ((0, 0), (1, 0), (0, 1))], float)
    blocks = [("wedge", np.arange(6)[None]), ("tetra", np.array([[0, 1, 2, 3]]))]
    mesh = read_mesh_of(meshio.Mesh(corners, blocks))
    assert mesh.signed_measures.tolist() == pytest.approx([0.5, 1 / 6])


def test_kinds_that_cannot_be_used_are_named_with_their_number(monkeypatch):
    monkeypatch.setitem(meshio._mesh.topological_dimension, "trumpet5", 3)
    mesh = meshio.Mesh(np.zeros((5, 3)), [("trumpet5", np.array([[0, 1, 2, 3, 4]] * 3))])
    with pytest.raises(MeshError, match="3 cells of kind 'trumpet5'"):
        raw_of_meshio(mesh)


def test_a_reader_that_ends_the_process_is_our_error_with_its_reason(tmp_path, capfd):
    path = tmp_path / "a.off"
    path.write_text("OFF\n3 1 0\n0 0 0\n1 0 0\n")  # two of three points
    with pytest.raises(FileError, match="cannot be read as off") as error:
        read_mesh(path)
    assert "\n" not in str(error.value)
    path = tmp_path / "a.ply"
    path.write_text("ply\nformat ascii 1.0\nelement edge 2\nend_header\n")
    with pytest.raises(FileError, match=r"got `element edge 2`$"):
        read_mesh(path)
    path = tmp_path / "a.msh"
    path.write_text("$MeshFormat\n4.1 7 8\n$EndMeshFormat\n")
    with pytest.raises(FileError, match="cannot be read as gmsh"):
        read_mesh(path)
    path = tmp_path / "a.mesh"
    path.write_text("MeshVersionFormatted 9\n")
    with pytest.raises(FileError, match="cannot be read as medit: .*") as error:
        read_mesh(path)
    assert capfd.readouterr() == ("", "")


def test_meshio_says_nothing_on_the_terminal(tmp_path, capfd):
    path = tmp_path / "a.msh"
    path.write_text(
        "$MeshFormat\n2.2 0 8\n$EndMeshFormat\n$Nodes\n3\n1 0 0 0\n2 1 0 0\n3 0 1 0\n$EndNodes\n"
        "$Elements\n1\n1 2 4 1 2 3 4 1 2 3\n$EndElements\n"
    )
    with meshio_files.quiet_meshio() as chatter:
        meshio.read(path)
    assert "Warning" in chatter.getvalue()
    assert read_mesh(path).n_cells == 1
    assert capfd.readouterr() == ("", "")


VOXEL = """<VTKFile type="UnstructuredGrid" version="0.1"><UnstructuredGrid>
<Piece NumberOfPoints="8" NumberOfCells="2"><Points>
<DataArray type="Float64" NumberOfComponents="3" format="ascii">
0 0 0 1 0 0 0 1 0 1 1 0 0 0 1 1 0 1 0 1 1 1 1 1</DataArray></Points><Cells>
<DataArray type="Int32" Name="connectivity" format="ascii">0 1 2 4 0 1 2 3 4 5 6 7</DataArray>
<DataArray type="Int32" Name="offsets" format="ascii">4 12</DataArray>
<DataArray type="UInt8" Name="types" format="ascii">10 11</DataArray>
</Cells></Piece></UnstructuredGrid></VTKFile>"""


def test_elements_that_meshio_skips_are_an_error(tmp_path):
    path = tmp_path / "a.vtu"
    path.write_text(VOXEL)
    with meshio_files.quiet_meshio():
        assert [block.type for block in meshio.read(path).cells] == ["tetra"]
    with pytest.raises(FileError, match=r"cannot handle \(type 11\)"):
        meshio_files.read_with_meshio(path, ("vtu",))
    assert read_mesh(path).kind.tolist() == [10, 11]


def test_collections_of_grids_are_refused(tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)  # meshio writes the HDF5 of a series where it stands
    path = tmp_path / "a.xdmf"
    with meshio.xdmf.TimeSeriesWriter(path) as writer:
        corners, tets, _ = tet_block()
        writer.write_points_cells(corners, [("tetra", tets)])
        writer.write_data(0.0, cell_data={"work": [np.zeros(6)]})
    with pytest.raises(FileError, match="collection of grids"):
        read_mesh(path)


def test_readers_that_loop_are_interrupted(tmp_path, monkeypatch):
    (tmp_path / "a.node").touch()
    path = tmp_path / "a.ele"
    path.write_text("1 4 0\n")
    monkeypatch.setattr(meshio_files, "PATIENCE", 0.3)
    start = time.monotonic()
    with pytest.raises(FileError, match="does not come to an end"):
        read_mesh(path)
    assert time.monotonic() - start < 30


def test_a_reader_that_is_done_in_time_is_not_interrupted():
    with limits.interrupted_after(0.05):
        pass
    deadline = time.monotonic() + 0.2
    while time.monotonic() < deadline:
        sum(range(100))


@pytest.mark.skipif(sys.platform != "linux", reason="limits on address space are Linux's")
def test_requests_for_memory_by_a_number_in_the_file_fail(tmp_path):
    path = tmp_path / "a.msh"
    tag = 3_000_000_000  # meshio makes a table as long as the largest tag: 24 GB
    path.write_text(
        f"$MeshFormat\n4.1 0 8\n$EndMeshFormat\n$Nodes\n1 3 1 {tag}\n2 1 0 3\n1\n2\n{tag}\n"
        "0 0 0\n1 0 0\n0 1 0\n$EndNodes\n$Elements\n1 1 1 1\n2 1 2 1\n"
        f"1 1 2 {tag}\n$EndElements\n"
    )
    with pytest.raises(FileError, match="more memory"):
        read_mesh(path)


def test_fields_of_several_blocks_of_gmsh_22_are_read(tmp_path):
    corners, tets, triangles = tet_block()
    path = tmp_path / "a.msh"
    blocks = [("tetra", tets), ("triangle", triangles)]
    data = {"work": [np.arange(6.0), np.zeros(4)]}
    meshio.Mesh(corners, blocks, cell_data=data).write(path, file_format="gmsh22")
    assert read_mesh(path).cell_fields["work"].tolist() == list(range(6))
