"""VTKHDF: partitions, ghosts, polyhedra and time steps; each guard against a damaged file."""

from __future__ import annotations

import numpy as np
import pytest
import vtk

from sfcpart.errors import FileError, MeshError
from sfcpart.files.hdf5 import create_hdf5
from sfcpart.files.meshes.read import read_mesh
from sfcpart.files.meshes.vtkhdf_read import vtkhdf_counts
from sfcpart.files.parts.vtkhdf_write import write_vtkhdf
from sfcpart.graph import cell_graph
from tests.file_samples import MIXED, assert_is_sample, points, vtk_grid
from tests.parted import parted


def write_grid(path, **changes):
    """Write two partitions of one hexahedron and its halo copy of the other, by hand."""
    corners = np.array([[x, y, z] for z in (0, 1) for y in (0, 1) for x in (0, 1, 2)], float)
    left, right = [0, 1, 4, 3, 6, 7, 10, 9], [1, 2, 5, 4, 7, 8, 11, 10]
    arrays = {
        "NumberOfPoints": [12, 12],
        "NumberOfCells": [2, 2],
        "NumberOfConnectivityIds": [16, 16],
        "Points": np.concatenate([corners, corners]),
        "Connectivity": np.array([left, right, right, left], np.int64).reshape(-1),
        "Offsets": [0, 8, 16, 0, 8, 16],
        "Types": np.full(4, 12, np.uint8),
        "CellData/vtkGhostType": np.array([0, 1, 0, 1], np.uint8),
        "CellData/GlobalCellIds": [0, 1, 1, 0],
        "PointData/GlobalPointIds": [*range(12), *range(12)],
        "FieldData/step": [3.0],
    }
    kind = changes.pop("Type", b"UnstructuredGrid")
    arrays |= changes
    with create_hdf5(path) as file:
        group = file.create_group("VTKHDF")
        group.attrs["Version"] = changes.get("@Version", [2, 2])
        group.attrs.create("Type", np.bytes_(kind))
        for name, values in arrays.items():
            if values is not None and not name.startswith("@"):
                group.create_dataset(name, data=np.asarray(values))
    return path


@pytest.fixture
def path(tmp_path):
    return tmp_path / "a.vtkhdf"


def test_partitions_are_joined_and_ghosts_counted_once(path):
    mesh = read_mesh(write_grid(path))
    assert mesh.cell_fields["GlobalCellIds"].tolist() == [0, 1]
    assert (mesh.n_cells, mesh.n_points, mesh.indices.dtype) == (2, 12, np.int32)
    assert mesh.measures.tolist() == [1.0, 1.0]
    assert cell_graph(mesh).n_faces == 1
    assert vtkhdf_counts(path)[:2] == (4, 24)


def test_without_global_ids_points_of_partitions_stay_separate(path):
    mesh = read_mesh(write_grid(path, **{"PointData/GlobalPointIds": None}))
    assert (mesh.n_cells, mesh.n_points) == (2, 24)
    assert cell_graph(mesh).n_faces == 0


def test_files_of_vtk_come_back_in_file_order(path):
    writer = vtk.vtkHDFWriter()
    writer.SetFileName(str(path))
    writer.SetInputDataObject(vtk_grid(MIXED))
    writer.Write()
    mesh = read_mesh(path)
    assert_is_sample(mesh, MIXED)
    np.testing.assert_array_equal(mesh.points, points())


def test_last_time_step_is_read(path):
    """Two steps that share no geometry: a hexahedron of size 1, then one of size 8."""
    cube = np.array([[x, y, z] for z in (0, 1) for x, y in ((0, 0), (1, 0), (1, 1), (0, 1))], float)
    write_grid(
        path,
        **{
            "NumberOfPoints": [8, 8],
            "NumberOfCells": [1, 1],
            "NumberOfConnectivityIds": [8, 8],
            "Points": np.concatenate([cube, 2 * cube]),
            "Connectivity": [*range(8), *range(8)],
            "Offsets": [0, 8, 0, 8],
            "Types": np.full(2, 12, np.uint8),
            "CellData/vtkGhostType": None,
            "CellData/GlobalCellIds": None,
            "CellData/work": [5.0, 6.0, 7.0],
            "PointData/GlobalPointIds": None,
            "Steps/PartOffsets": [0, 1],
            "Steps/NumberOfParts": [1, 1],
            "Steps/PointOffsets": [0, 8],
            "Steps/CellOffsets": [0, 1],
            "Steps/ConnectivityIdOffsets": [0, 8],
            "Steps/CellDataOffsets/work": [0, 2],
        },
    )
    import h5py

    with h5py.File(path, "r+") as file:
        file["VTKHDF/Steps"].attrs["NSteps"] = 2
    mesh = read_mesh(path)
    assert mesh.measures.tolist() == [8.0]
    assert mesh.cell_fields["work"].tolist() == [7.0]
    assert vtkhdf_counts(path)[:2] == (1, 8)


@pytest.mark.parametrize(
    ("changes", "words"),
    [
        ({"Type": b"PolyData"}, "of type PolyData; wanted UnstructuredGrid"),
        ({"Type": b"MultiBlockDataSet"}, "of type MultiBlockDataSet"),
        ({"@Version": [3, 0]}, r"version \[3, 0\]; wanted version 1 or 2"),
        ({"Types": None}, "Types is missing"),
        ({"Types": np.full(3, 12, np.uint8)}, "Types has 3 rows; the counts ask for 4"),
        ({"Points": np.zeros((5, 3))}, "Points has 5 rows; the counts ask for 24"),
        ({"NumberOfCells": [2]}, "differ in number of parts"),
        ({"NumberOfCells": [2, -2]}, "cannot be negative"),
        ({"Offsets": [0, 8, 16, 0, 8, 17]}, "partition 1 goes from 0 to 17; wanted 0 to 16"),
        ({"Connectivity": [b"a"] * 32}, "wanted numbers"),
        ({"CellData/work": [1.0]}, "CellData/work has 1 rows"),
    ],
)
def test_damage_is_one_clear_line(path, changes, words):
    with pytest.raises(FileError, match=words) as error:
        read_mesh(write_grid(path, **changes))
    assert str(error.value).startswith(f"{path}: ")
    assert "\n" not in str(error.value)


def test_an_id_of_another_partition_is_no_id(path):
    ids = np.tile(np.arange(8), 4)
    ids[20] = -1  # would be the last point of the first partition if shifted unchecked
    with pytest.raises(MeshError, match="entry 4 of VTKHDF/Connectivity in partition 1 is -1"):
        read_mesh(write_grid(path, Connectivity=ids))


def test_falling_offsets_are_refused(path):
    with pytest.raises(FileError, match="Offsets of partition 0 falls"):
        read_mesh(write_grid(path, Offsets=[0, 20, 16, 0, 8, 16]))


def test_a_shape_that_is_not_stored_takes_no_memory(path):
    write_grid(path, Types=None)
    import h5py

    with h5py.File(path, "r+") as file:
        file.create_dataset("VTKHDF/Types", shape=(1 << 40,), dtype=np.uint8, chunks=(1 << 20,))
    with pytest.raises(FileError, match="claims 1099511627776 bytes"):
        read_mesh(path)


def test_a_virtual_dataset_without_its_source_is_refused(path, tmp_path):
    import h5py

    write_grid(path, Points=None)
    layout = h5py.VirtualLayout(shape=(24, 3), dtype=float)
    layout[:] = h5py.VirtualSource("gone.h5", "p", shape=(24, 3))
    with h5py.File(path, "r+") as file:
        file.create_virtual_dataset("VTKHDF/Points", layout)
    with pytest.raises(FileError, match=r"lies in gone\.h5, not found"):
        read_mesh(path)


def test_other_hdf5_is_told_what_it_holds(path):
    with create_hdf5(path) as file:
        file["flow"] = [1]
    with pytest.raises(FileError, match=r"no mesh that is known \(it has flow\)"):
        read_mesh(path)


@pytest.mark.parametrize("name", ["tets", "mixed", "section", "shell", "polyhedra", "hybrid"])
def test_our_own_files_read_back_as_the_unsplit_mesh(path, name):
    given = parted(name)
    write_vtkhdf(path, given.mesh, partition=given.partition, halo=given.halo)
    mesh = read_mesh(path)
    order = np.argsort(mesh.cell_fields["GlobalCellIds"])
    np.testing.assert_array_equal(mesh.kind[order], given.mesh.kind)
    np.testing.assert_array_equal(mesh.cell_fields["part"][order], given.partition.cell_part)
    np.testing.assert_allclose(mesh.measures[order], given.mesh.measures, rtol=1e-12)
    assert cell_graph(mesh).n_faces == cell_graph(given.mesh).n_faces
