"""Choosing a format, refusing what is no mesh, and values of cells."""

from __future__ import annotations

import os

import numpy as np
import pytest

from sfcpart.errors import FileError, InputError, MeshError
from sfcpart.files.meshes import meshio_files
from sfcpart.files.meshes.cell_values import read_cell_values
from sfcpart.files.meshes.formats import EXTENSIONS, file_format
from sfcpart.files.meshes.read import read_mesh
from tests.file_samples import SU2, write_shell, write_tets


def assert_refused(path, words, error=FileError):
    with pytest.raises(error, match=words) as caught:
        read_mesh(path)
    text = str(caught.value)
    assert "\n" not in text
    assert str(path) in text
    return text


def test_what_is_no_file_is_refused(tmp_path):
    assert_refused(tmp_path / "none.vtu", "No such file or directory")
    assert_refused(tmp_path, "is a folder")
    empty = tmp_path / "a.msh"
    empty.touch()
    assert_refused(empty, "is empty")
    os.mkfifo(tmp_path / "pipe.vtu")
    assert_refused(tmp_path / "pipe.vtu", "no regular file")
    with pytest.raises(FileError, match="null"):
        read_mesh("a\0b.vtu")


def test_an_unreadable_file_is_refused(tmp_path, monkeypatch):
    path = tmp_path / "a.vtu"
    write_tets(path, "vtu")
    path.chmod(0)
    if os.access(path, os.R_OK):  # root reads everything: let the system say no by hand
        monkeypatch.setattr("pathlib.Path.open", _denied)
    assert_refused(path, "Permission denied")


def _denied(*_args, **_options):
    raise PermissionError(13, "Permission denied")


def test_an_unknown_extension_lists_those_known(tmp_path):
    path = tmp_path / "a.xyz"
    path.write_text("1 2 3")
    assert "known: .vtkhdf" in assert_refused(path, "unknown format")
    path.rename(tmp_path / "none")
    assert_refused(tmp_path / "none", "extension none")


@pytest.mark.parametrize("name", ["vtkhdf", "vtu", "vtk", "h5"])
def test_a_name_that_lies_is_told_so(tmp_path, name):
    path = tmp_path / f"a.{name}"
    path.write_text("no mesh at all")
    assert_refused(path, "although it is called so")


def test_content_wins_over_a_wrong_extension(tmp_path):
    path = tmp_path / "a.msh"
    write_tets(path, "vtu")
    assert file_format(path) == ("vtu",)
    assert read_mesh(path).n_cells == 6
    path.write_text(SU2)
    assert file_format(path) == ("su2",)
    assert read_mesh(path).n_cells == 4


def test_blank_heads_are_looked_at_in_no_time(tmp_path):
    path = tmp_path / "a.xyz"  # a careless pattern takes for ever on these
    path.write_text(" " * 5000 + "% " * 5000)
    assert_refused(path, "unknown format")


def test_extensions_of_packed_files_are_known(tmp_path):
    path = tmp_path / "a.b.vol.gz"
    path.write_bytes(b"\x1f\x8b")
    assert file_format(path) == EXTENSIONS[".vol.gz"]


@pytest.mark.parametrize("bad", [np.nan, np.inf])
@pytest.mark.parametrize("name", ["vtu", "vtk", "msh"])
def test_coordinates_that_are_not_finite_are_named(tmp_path, bad, name):
    path = tmp_path / f"a.{name}"
    import meshio

    corners = np.eye(4, 3)
    corners[2, 1] = bad
    meshio.Mesh(corners, [("tetra", np.array([[0, 1, 2, 3]]))]).write(path)
    assert_refused(path, "point 2 has coordinates", MeshError)


def test_files_without_cells_are_refused(tmp_path):
    import meshio

    path = tmp_path / "a.vtk"
    meshio.Mesh(np.eye(3), [("line", np.array([[0, 1], [1, 2]]))]).write(path)
    assert_refused(path, "no cells of dimension 2 or 3, only 2 line", MeshError)
    meshio.Mesh(np.eye(3), [("vertex", np.array([[0], [1]]))]).write(path)
    assert_refused(path, "only 2 vertex; use Mesh.from_centers", MeshError)
    meshio.Mesh(np.eye(3), []).write(tmp_path / "a.msh")
    with pytest.raises((FileError, MeshError)):
        read_mesh(tmp_path / "a.msh")


def test_points_in_a_plane_keep_their_third_column(tmp_path):
    path = tmp_path / "a.vtu"
    import meshio

    corners = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0]], float)
    meshio.Mesh(corners, [("triangle", np.array([[0, 1, 2]]))]).write(path)
    assert read_mesh(path).points.shape == (3, 3)


def test_shells_are_read(tmp_path):
    for name in ("ply", "off", "stl", "obj"):
        path = tmp_path / f"a.{name}"
        write_shell(path, name)
        mesh = read_mesh(path)
        assert (mesh.n_cells, mesh.dim, mesh.space_dim) == (4, 2, 3)
        assert mesh.measures.sum() == pytest.approx(1.5 + np.sqrt(3) / 2)


@pytest.mark.parametrize("name", ["ply", "off", "stl"])
def test_shells_cut_short_are_refused(tmp_path, monkeypatch, name):
    monkeypatch.setattr(meshio_files, "PATIENCE", 1.0)
    path = tmp_path / f"a.{name}"
    write_shell(path, name)
    content = path.read_bytes()
    cuts = range(len(content) // 4, len(content) - 25, 7)
    for stop in cuts:
        path.write_bytes(content[:stop])
        with pytest.raises((FileError, MeshError)) as error:
            read_mesh(path)
        assert "come to an end" not in str(error.value)  # seen at once, not after waiting
    assert len(cuts) > 5


def values(tmp_path, name, content, n_cells=3):
    path = tmp_path / name
    if isinstance(content, np.ndarray):
        np.save(path, content, allow_pickle=True)
    else:
        path.write_text(content)
    return read_cell_values(path, n_cells)


def test_values_of_cells_come_from_text_csv_and_npy(tmp_path):
    for content in ("1\n2\n\n3\n", "# part\n1\n2  # rock\n3", "1\r\n2\r\n3\r\n"):
        found = values(tmp_path, "a.txt", content)
        assert (found.tolist(), found.dtype) == ([1, 2, 3], np.int64)
    assert values(tmp_path, "a.csv", "part\n1,\n2,\n3,\n").tolist() == [1, 2, 3]
    real = values(tmp_path, "a.txt", "1\n2.5\n3e0")
    assert (real.tolist(), real.dtype) == ([1, 2.5, 3], np.float64)
    big = values(tmp_path, "a.txt", f"{2**53 + 1}\n0\n0")  # a float would lose the last digit
    assert big[0] == 2**53 + 1
    for dtype in (np.uint8, np.int32, np.int64, np.float32, bool):
        found = values(tmp_path, "a.npy", np.array([[1], [0], [1]], dtype))
        assert found.tolist() == [1, 0, 1]


def test_values_of_cells_that_are_no_such_are_refused(tmp_path):
    with pytest.raises(InputError, match="holds 3 values; wanted 4"):
        values(tmp_path, "a.txt", "1\n2\n3", n_cells=4)
    with pytest.raises(InputError, match="holds 2x3 values"):
        values(tmp_path, "a.npy", np.zeros((2, 3)))
    with pytest.raises(FileError, match="line 2 is 'rock'; wanted one number a line"):
        values(tmp_path, "a.txt", "1\nrock\n3")
    with pytest.raises(FileError, match="line 1 is '1 2 3'"):
        values(tmp_path, "a.txt", "1 2 3")
    with pytest.raises(FileError, match="no usable .npy"):
        values(tmp_path, "a.npy", np.array([{}, [], None], dtype=object))
    with pytest.raises(FileError, match="wanted integers or reals"):
        values(tmp_path, "a.npy", np.array(["a", "b", "c"]))
    with pytest.raises(FileError, match="largest integer"):
        values(tmp_path, "a.npy", np.full(3, 2**64 - 1, np.uint64))
    (tmp_path / "cut.npy").write_bytes((tmp_path / "a.npy").read_bytes()[:140])
    with pytest.raises(FileError, match="no usable .npy"):
        read_cell_values(tmp_path / "cut.npy", 3)
    (tmp_path / "a.bin").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(FileError, match="neither .npy nor text"):
        read_cell_values(tmp_path / "a.bin", 3)
    with pytest.raises(FileError, match="No such file"):
        read_cell_values(tmp_path / "none.txt", 3)
