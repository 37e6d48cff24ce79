"""One part, as a solver loads it."""

from __future__ import annotations

import shutil

import h5py
import numpy as np
import pytest

from sfcpart.comm import SerialComm
from sfcpart.errors import FileError, InputError
from sfcpart.files.parts.lists import write_list_file
from sfcpart.files.parts.part import read_part
from sfcpart.files.parts.vtkhdf_write import write_vtkhdf
from sfcpart.mesh.mesh import Mesh
from tests.parted import SAMPLES, parted, sliced


@pytest.fixture
def folder(tmp_path):
    case = parted("tets", n_parts=4)
    path = tmp_path / "parts.vtkhdf"
    write_vtkhdf(path, case.mesh, partition=case.partition, halo=case.halo, input_digest="abc")
    return tmp_path


@pytest.mark.parametrize("compress", [False, True])
@pytest.mark.parametrize("name", SAMPLES)
def test_parts_come_back_as_written(tmp_path, name, compress):
    case = parted(name, n_parts=2, layers=2)
    path = tmp_path / "parts.vtkhdf"
    write_vtkhdf(path, case.mesh, partition=case.partition, halo=case.halo, compress=compress)
    for number in range(2):
        part = read_part(tmp_path, number)
        owned, foreign = case.halo.owned_cells(number), case.halo.halo_cells(number)
        assert (part.part, part.n_parts, part.n_owned) == (number, 2, len(owned))
        assert part.cell_gid.tolist() == [*owned, *foreign]
        assert np.array_equal(
            part.cell_fields["depth"], case.mesh.cell_fields["depth"][part.cell_gid]
        )
        assert np.array_equal(part.cell_fields["part"], case.partition.cell_part[part.cell_gid])
        assert (part.layers, part.across) == (case.halo.layers, "faces")
        assert part.neighbour.tolist() == case.halo.neighbours(number).tolist()
        for to in part.neighbour:
            assert np.array_equal(part.send_list(to), case.halo.send_list(number, to))
            assert np.array_equal(part.receive_list(to), case.halo.receive_list(number, to))
        if case.mesh.points is not None:
            _assert_points(part, case.mesh)


def _assert_points(part, mesh):
    """Assert that points, cells and faces are those of the mesh."""
    dim = mesh.points.shape[1]
    assert np.array_equal(part.points[:, :dim], mesh.points[part.point_gid])
    assert np.array_equal(part.point_fields["wet"], mesh.point_fields["wet"][part.point_gid])
    for cell, gid in enumerate(part.cell_gid):
        local = part.indices[part.indptr[cell] : part.indptr[cell + 1]]
        wanted = mesh.indices[mesh.indptr[gid] : mesh.indptr[gid + 1]]
        assert part.point_gid[local].tolist() == wanted.tolist()
        if mesh.polyhedra is not None:
            faces = _faces(part.polyhedra, cell, lambda rows: part.point_gid[rows])
            assert faces == _faces(mesh.polyhedra, gid, lambda rows: rows)


def _faces(solid, cell, named):
    """Return the faces of a polyhedron as lists of points."""
    faces = solid.cell_indices[solid.cell_indptr[cell] : solid.cell_indptr[cell + 1]]
    return [
        named(solid.face_indices[solid.face_indptr[f] : solid.face_indptr[f + 1]]).tolist()
        for f in faces
    ]


@pytest.mark.parametrize("name", ["mixed", "section"])
def test_boundary_elements_go_to_the_owners_of_their_cells(tmp_path, name):
    case = parted(name, n_parts=3)
    assert case.mesh.boundary
    path = tmp_path / "parts.vtkhdf"
    write_vtkhdf(path, case.mesh, partition=case.partition, halo=case.halo)
    parts = [read_part(path, number) for number in range(3)]
    cells = [
        set(case.mesh.indices[first:last].tolist())
        for first, last in zip(case.mesh.indptr[:-1], case.mesh.indptr[1:], strict=True)
    ]
    for number, group in enumerate(case.mesh.boundary):
        wanted, found = set(), set()
        for element in range(len(group.kind)):
            points = group.indices[group.indptr[element] : group.indptr[element + 1]].tolist()
            for cell in [c for c, held in enumerate(cells) if held.issuperset(points)][:2]:
                wanted.add((element, int(case.partition.cell_part[cell]), tuple(points)))
        for part in parts:
            mine = part.boundary[number]
            assert (mine.name, mine.tag) == (group.name, group.tag)
            assert np.array_equal(mine.kind, group.kind[mine.element])
            for row, element in enumerate(mine.element):
                local = mine.indices[mine.indptr[row] : mine.indptr[row + 1]]
                cell = mine.cell[row]
                assert cell < part.n_owned
                assert set(local) <= set(part.indices[part.indptr[cell] : part.indptr[cell + 1]])
                found.add((int(element), part.part, tuple(part.point_gid[local].tolist())))
        assert found == wanted


def test_an_inner_wall_goes_to_both_sides(tmp_path):
    points = [[x, y] for y in (0.0, 1.0) for x in (0.0, 1.0, 2.0)]
    cells = {"quad": [[0, 1, 4, 3], [1, 2, 5, 4]], "line": [[1, 4], [0, 3], [3, 5]]}
    case = sliced(Mesh.from_arrays(points, cells), n_parts=2)
    path = tmp_path / "parts.vtkhdf"
    write_vtkhdf(path, case.mesh, partition=case.partition, halo=case.halo)
    held = [read_part(path, number).boundary[0].element.tolist() for number in range(2)]
    assert held == [[0, 1], [0]]  # line 3-5 is no side of any cell


def test_a_field_travels_between_all_parts(folder):
    parts = [read_part(folder, number) for number in range(4)]
    held = [np.where(np.arange(p.n_cells) < p.n_owned, p.cell_gid, -1) for p in parts]
    for part in parts:
        for to in part.neighbour:
            held[to][parts[to].receive_list(part.part)] = held[part.part][part.send_list(to)]
    for part, values in zip(parts, held, strict=True):
        assert np.array_equal(values, part.cell_gid)


def test_arrays_are_read_only(folder):
    part = read_part(folder, 1)
    for array in (part.points, part.indices, part.send, part.receive, part.cell_fields["depth"]):
        assert not array.flags.writeable
    assert part.input_digest == "abc"
    with pytest.raises(TypeError):
        part.cell_fields["new"] = part.kind


def test_a_part_that_does_not_exist(folder):
    for number in (-1, 4):
        with pytest.raises(FileError, match="parts go from 0 to 3"):
            read_part(folder, number)
    with pytest.raises(InputError, match=r"part is 1\.0"):
        read_part(folder, 1.0)


def test_a_neighbour_that_is_none(folder):
    with pytest.raises(InputError, match="part 0 exchanges nothing with part 3"):
        read_part(folder, 0).send_list(3)


def test_files_that_are_no_parts(folder):
    with pytest.raises(FileError, match="cannot be read"):
        read_part(folder / "none", 0)
    (folder / "empty").mkdir()
    with pytest.raises(FileError, match=r"holds no parts\.vtkhdf"):
        read_part(folder / "empty", 0)
    (folder / "text.vtkhdf").write_text("no")
    with pytest.raises(FileError, match="no HDF5 file"):
        read_part(folder / "text.vtkhdf", 0)
    with h5py.File(folder / "foreign.vtkhdf", "w") as file:
        file.create_group("VTKHDF")
    with pytest.raises(FileError, match="no group /sfcpart"):
        read_part(folder / "foreign.vtkhdf", 0)
    write_list_file(folder / "lists.h5", parted("tets").halo, comm=SerialComm())
    with pytest.raises(FileError, match="but no mesh"):
        read_part(folder / "lists.h5", 0)


def test_lists_of_the_future(folder):
    with h5py.File(folder / "parts.vtkhdf", "r+") as file:
        file["sfcpart"].attrs["format_version"] = 2
    with pytest.raises(FileError, match="use a newer sfcpart"):
        read_part(folder, 0)


def test_lists_and_mesh_that_do_not_fit(folder):
    with h5py.File(folder / "parts.vtkhdf", "r+") as file:
        file["VTKHDF/Connectivity"][0] = 10**6
    with pytest.raises(FileError, match="do not fit"):
        read_part(folder, 0)


def test_damaged_files_give_a_part_or_our_error(folder):
    whole = (folder / "parts.vtkhdf").read_bytes()
    chance = np.random.default_rng(8)
    for turn in range(60):
        data = bytearray(whole)
        if turn % 3 == 0:
            data = data[: chance.integers(len(data))]
        else:
            for at in chance.integers(0, min(len(data), 20_000), 40):
                data[at] = chance.integers(256)
        (folder / "bad").mkdir()
        (folder / "bad" / "parts.vtkhdf").write_bytes(data)
        try:
            read_part(folder / "bad", int(chance.integers(4)))
        except FileError as error:
            assert "\n" not in str(error)
        shutil.rmtree(folder / "bad")
