"""The VTKHDF file, dataset by dataset, against the mesh it was made of."""

from __future__ import annotations

import subprocess
import sys

import h5py
import numpy as np
import pytest

from sfcpart.errors import FileError, PartitionError
from sfcpart.files.meshes.read import read_mesh
from sfcpart.files.parts import pieces
from sfcpart.files.parts.vtkhdf_write import write_vtkhdf
from sfcpart.manual import read_page
from sfcpart.mesh.mesh import Mesh
from tests.parted import SAMPLES, Parted, parted, sliced


def write(path, case: Parted, **options) -> None:
    write_vtkhdf(path, case.mesh, partition=case.partition, halo=case.halo, **options)


@pytest.mark.parametrize("name", SAMPLES)
def test_cells_and_fields_of_each_part(tmp_path, name):
    case = parted(name, n_parts=4)
    write(tmp_path / "parts.vtkhdf", case)
    with h5py.File(tmp_path / "parts.vtkhdf") as file:
        root = file["VTKHDF"]
        assert root.attrs["Version"].tolist() == [2, 6]
        assert root.attrs["Type"] == b"UnstructuredGrid"
        halo = case.halo
        wanted = [np.r_[halo.owned_cells(p), halo.halo_cells(p)] for p in range(4)]
        gid = root["CellData/GlobalCellIds"][:]
        assert gid.tolist() == np.concatenate(wanted).tolist()
        assert root["NumberOfCells"][:].tolist() == [len(cells) for cells in wanted]
        assert root["CellData/part"][:].tolist() == case.partition.cell_part[gid].tolist()
        assert root["CellData/depth"][:].tolist() == case.mesh.cell_fields["depth"][gid].tolist()
        assert root["CellData/flow"].shape == (len(gid), 3)
        n_owned = np.diff(halo.owned_indptr)
        ghost = np.concatenate(
            [np.arange(len(w)) >= n for w, n in zip(wanted, n_owned, strict=True)]
        )
        assert root["CellData/vtkGhostType"][:].tolist() == ghost.astype(int).tolist()
        assert root["CellData/vtkGhostType"].dtype == root["Types"].dtype == np.uint8


@pytest.mark.parametrize("name", [name for name in SAMPLES if name not in ("faces", "centers")])
def test_each_cell_has_its_points(tmp_path, name):
    case = parted(name, n_parts=3)
    write(tmp_path / "parts.vtkhdf", case)
    with h5py.File(tmp_path / "parts.vtkhdf") as file:
        root = {key: item[:] for key, item in file["VTKHDF"].items() if hasattr(item, "shape")}
        gid = file["VTKHDF/CellData/GlobalCellIds"][:]
        point_gid = file["VTKHDF/PointData/GlobalPointIds"][:]
        wet = file["VTKHDF/PointData/wet"][:]
    mesh = case.mesh
    assert np.array_equal(root["Points"][:, : mesh.points.shape[1]], mesh.points[point_gid])
    assert np.array_equal(wet, mesh.point_fields["wet"][point_gid])
    assert np.array_equal(root["Types"], mesh.kind[gid])
    cell = entry = point = 0
    for part in range(3):
        n_cells, n_points = root["NumberOfCells"][part], root["NumberOfPoints"][part]
        offsets = root["Offsets"][cell + part : cell + n_cells + part + 1]
        assert offsets[0] == 0
        assert offsets[-1] == root["NumberOfConnectivityIds"][part]
        ids = point_gid[point : point + n_points]
        assert len(set(ids.tolist())) == n_points
        local = root["Connectivity"][entry : entry + offsets[-1]]
        assert set(local.tolist()) == set(range(n_points))
        for row, number in enumerate(gid[cell : cell + n_cells]):
            wanted = mesh.indices[mesh.indptr[number] : mesh.indptr[number + 1]]
            assert ids[local[offsets[row] : offsets[row + 1]]].tolist() == wanted.tolist()
        cell, entry, point = cell + n_cells, entry + offsets[-1], point + n_points


def test_meshes_without_points_become_vertices_at_the_centres(tmp_path):
    case = parted("centers")
    write(tmp_path / "parts.vtkhdf", case)
    with h5py.File(tmp_path / "parts.vtkhdf") as file:
        root = file["VTKHDF"]
        gid = root["PointData/GlobalPointIds"][:]
        assert set(root["Types"][:]) == {1}
        assert np.array_equal(root["Points"][:, :2], case.mesh.centers[gid])
        assert np.all(root["Points"][:, 2] == 0)


@pytest.mark.parametrize("name", ["mixed", "hybrid", "polyhedra"])
def test_blocks_and_threads_do_not_change_the_file(tmp_path, name, monkeypatch):
    case = parted(name, n_parts=2 if name == "hybrid" else 5, across="points")
    written = []
    for block, threads in ((1, "1"), (60, "2"), (1 << 20, "3")):
        monkeypatch.setattr(pieces.blocks, "__kwdefaults__", {"block_cells": block})
        monkeypatch.setenv("SFCPART_THREADS", threads)
        write(tmp_path / "parts.vtkhdf", case)
        with h5py.File(tmp_path / "parts.vtkhdf") as file:
            found = {}
            file.visititems(
                lambda key, item, found=found: (
                    found.update({key: item[:].tolist()}) if hasattr(item, "shape") else None
                )
            )
        written.append(found)
    assert written[0] == written[1] == written[2]
    assert "VTKHDF/Connectivity" in written[0]


def test_packing_keeps_every_value(tmp_path):
    case = parted("polyhedra")
    write(tmp_path / "plain.vtkhdf", case)
    write(tmp_path / "packed.vtkhdf", case, compress=True)
    with h5py.File(tmp_path / "plain.vtkhdf") as one, h5py.File(tmp_path / "packed.vtkhdf") as two:
        assert one["VTKHDF/Points"].compression is None
        assert two["VTKHDF/Points"].compression == "gzip"
        assert two["VTKHDF/Points"].shuffle
        for name in ("Points", "Connectivity", "FaceConnectivity", "CellData/flow"):
            assert np.array_equal(one["VTKHDF"][name][:], two["VTKHDF"][name][:])


def test_exchange_lists_lie_beside_the_mesh(tmp_path):
    case = parted("tets", layers=2)
    write(tmp_path / "parts.vtkhdf", case, input_digest="abc")
    with h5py.File(tmp_path / "parts.vtkhdf") as file:
        group = file["sfcpart"]
        about = dict(group.attrs)
        assert about == {
            "format_version": 1,
            "n_parts": 4,
            "n_cells": case.mesh.n_cells,
            "layers": 2,
            "across": b"faces",
            "input_digest": b"abc",
        }
        for name in ("owned_indptr", "halo_indptr", "neighbour_indptr", "neighbour", "send"):
            assert np.array_equal(group[name][:], getattr(case.halo, name))
        assert sorted(file) == ["VTKHDF", "sfcpart"]


def test_the_documentation_names_every_dataset(tmp_path):
    case = parted("section")
    write(tmp_path / "parts.vtkhdf", case)
    text = read_page("parts_file")
    with h5py.File(tmp_path / "parts.vtkhdf") as file:
        group = file["sfcpart"]
        names = {*group.attrs, *group, *group["boundary/0"], *group["boundary/0"].attrs}
        own = {"depth", "flow", "wet"}
        for place in ("CellData", "PointData"):
            names |= {f"{place}/{name}" for name in file["VTKHDF"][place] if name not in own}
    assert {"send", "boundary", "CellData/part"} <= names
    missing = [name for name in names if f"`{name}`" not in text and f"`{name}/" not in text]
    assert missing == []


def test_own_names_win_over_fields_of_the_mesh(tmp_path):
    case = parted("tets")
    mesh = case.mesh.with_cell_field("part", np.full(case.mesh.n_cells, 77))
    mesh = mesh.with_cell_field("GlobalCellIds", np.zeros(mesh.n_cells))
    mesh = mesh.with_cell_field("a/b", np.arange(mesh.n_cells) > 3)
    mesh = mesh.with_cell_field("tensor", np.ones((mesh.n_cells, 2, 2), ">f8"))
    write(tmp_path / "parts.vtkhdf", Parted(mesh, case.partition, case.halo))
    with h5py.File(tmp_path / "parts.vtkhdf") as file:
        data = file["VTKHDF/CellData"]
        assert data["part"][:].max() == 3
        assert len(set(data["GlobalCellIds"][:])) == mesh.n_cells
        assert set(data["InputCellIds"][:]) == {0}
        assert data["a_b"].dtype == np.uint8
        assert data["tensor"].shape[1:] == (4,)


@pytest.mark.parametrize("name", ["tets", "mixed", "polyhedra", "section", "shell"])
def test_the_file_reads_as_the_mesh_it_was_made_of(tmp_path, name):
    case = parted(name, n_parts=4, layers=2)
    write(tmp_path / "parts.vtkhdf", case)
    mesh = read_mesh(tmp_path / "parts.vtkhdf")
    gid = mesh.cell_fields["GlobalCellIds"]
    assert sorted(gid.tolist()) == list(range(case.mesh.n_cells))
    assert mesh.n_points == case.mesh.n_points
    assert np.allclose(mesh.centers, case.mesh.centers[gid], rtol=1e-13, atol=1e-13)
    assert np.array_equal(mesh.cell_fields["part"], case.partition.cell_part[gid])


def test_a_split_of_a_split_leads_back_to_the_first_mesh(tmp_path):
    case = parted("tets", n_parts=4)
    first = case.mesh.cell_fields["depth"]
    for n_parts in (3, 2):
        write(tmp_path / "parts.vtkhdf", case)
        case = sliced(read_mesh(tmp_path / "parts.vtkhdf"), n_parts=n_parts)
    mesh = case.mesh
    assert np.array_equal(mesh.cell_fields["depth"], first[mesh.cell_fields["InputCellIds"]])
    assert not np.array_equal(mesh.cell_fields["depth"], first[mesh.cell_fields["GlobalCellIds"]])


def test_more_parts_than_cells(tmp_path):
    mesh = Mesh.from_arrays(np.eye(4)[:, :3], {"tetra": [[0, 1, 2, 3]]})
    case = Parted(mesh, *_one_cell_in_three_parts(mesh))
    write(tmp_path / "parts.vtkhdf", case)
    with h5py.File(tmp_path / "parts.vtkhdf") as file:
        assert file["VTKHDF/NumberOfCells"][:].tolist() == [0, 1, 0]
        assert file["VTKHDF/NumberOfPoints"][:].tolist() == [0, 4, 0]
        assert file["VTKHDF/Offsets"][:].tolist() == [0, 0, 4, 0]


def _one_cell_in_three_parts(mesh):
    from sfcpart.graph import cell_graph
    from sfcpart.halo import build_halo
    from sfcpart.partition import Partition

    partition = Partition.from_array([1], 3)
    return partition, build_halo(mesh, cell_graph(mesh), partition, order=np.arange(1))


def test_lists_of_another_mesh_are_refused(tmp_path):
    case, other = parted("tets"), parted("mixed")
    with pytest.raises(PartitionError, match="numbers of cells differ"):
        write(tmp_path / "parts.vtkhdf", Parted(case.mesh, other.partition, other.halo))


def test_a_missing_folder_is_one_line(tmp_path):
    with pytest.raises(FileError, match=r"parts\.vtkhdf: cannot be created"):
        write(tmp_path / "none" / "parts.vtkhdf", parted("tets"))


def test_a_full_disk_is_one_line_and_leaves_nothing(tmp_path):
    script = """
import resource, sys
from tests.parted import parted
from sfcpart.errors import FileError
from sfcpart.files.parts.folder import output_folder
from sfcpart.files.parts.vtkhdf_write import write_vtkhdf
case = parted("tets")
resource.setrlimit(resource.RLIMIT_FSIZE, (int(sys.argv[2]), int(sys.argv[2])))
try:
    with output_folder(sys.argv[1]) as folder:
        write_vtkhdf(folder / "parts.vtkhdf", case.mesh, partition=case.partition, halo=case.halo)
except FileError as error:
    print(type(error).__name__, error)
"""
    for limit in (0, 1000, 9000, 30000):
        command = [sys.executable, "-c", script, str(tmp_path / "parts"), str(limit)]
        done = subprocess.run(command, capture_output=True, text=True, timeout=120)
        assert done.returncode == 0, (limit, done.stderr)
        assert done.stdout.startswith("FileError"), (limit, done.stdout, done.stderr)
        assert done.stdout.count("\n") == 1
        assert "make room" in done.stdout
        assert list(tmp_path.iterdir()) == []
