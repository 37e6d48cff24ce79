"""SU2: file order, names of markers, all line ends, and each kind of damage."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import FileError, MeshError
from sfcpart.files.meshes.read import read_mesh
from tests.file_samples import SU2, write_tets


def read_text(tmp_path, text):
    path = tmp_path / "a.su2"
    path.write_bytes(text.encode())
    return read_mesh(path)


@pytest.mark.parametrize("line_end", ["\n", "\r\n", "\r"])
def test_cells_stay_in_file_order_whatever_the_line_ends(tmp_path, line_end):
    mesh = read_text(tmp_path, SU2.replace("\n", line_end))
    assert mesh.kind.tolist() == [5, 9, 5, 5]  # meshio would put the quad last
    assert mesh.indices.tolist() == [0, 1, 4, 1, 2, 5, 4, 0, 4, 3, 4, 5, 3]
    assert mesh.points.tolist()[3:] == [[0, 1.5], [1, 1], [2, 1.25]]


def test_markers_are_boundary_groups_with_their_names(tmp_path):
    groups = read_text(tmp_path, SU2).boundary
    assert [(g.name, g.tag, g.indices.tolist()) for g in groups] == [
        ("rock bed", -1, [0, 1, 1, 2]),
        ("7", 7, [2, 5]),
    ]


def test_rows_without_index_and_with_comments_are_read(tmp_path):
    text = SU2.replace("5 0 1 4 0\n", "  5 0 1 4 % first\n\n").replace("1.0 0.0 1", "1.0 0.0")
    text = text.replace("0.0 0.0 0", "0.0 0.0").replace("2.0 0.0 2", "2.0 0.0")
    for row in ("0.0 1.5 3", "1.0 1.0 4", "2.0 1.25 5"):
        text = text.replace(row, row[:-2])
    mesh = read_text(tmp_path, text)
    assert mesh.kind.tolist() == [5, 9, 5, 5]
    assert mesh.points[5].tolist() == [2, 1.25]


def test_files_of_meshio_are_read(tmp_path):
    import meshio

    path = tmp_path / "a.su2"
    corners = np.array([[0, 0], [1, 0], [1, 1], [0, 1]], float)
    cells = [("triangle", np.array([[0, 1, 2], [0, 2, 3]]))]
    meshio.Mesh(corners, cells).write(path)
    mesh = read_mesh(path)
    assert mesh.measures.tolist() == [0.5, 0.5]


@pytest.mark.parametrize(
    ("old", "new", "words"),
    [
        ("NELEM= 4", "NELEM= 5", "NELEM= 5, but 4 rows follow"),
        ("NELEM= 4", "NELEM= many", "wanted a number"),
        ("NPOIN= 6", "NPOIN= 7", "NPOIN= 7, but 18 numbers follow"),
        ("1.0 1.0 4", "1.0 one 4", "NPOIN holds something else than numbers"),
        ("9 1 2 5 4 1", "9 1 2 5", r"row 1 is \[9, 1, 2, 5\]"),
        ("9 1 2 5 4 1", "99 1 2 5 4 1", r"row 1 is \[99"),
        ("NDIME= 2", "NDIME= 4", "NDIME= 4: wanted 2 or 3"),
        ("NDIME= 2", "NDIME= 2\nNZONE= 2", "holds 2 zones"),
        ("NMARK= 2", "NELEM= 0\nNMARK= 2", "two sections NELEM"),
        ("NMARK= 2", "NMARK= 3", "NMARK= 3, but 2 follow"),
        ("NPOIN=", "NPOINTS=", "no section NPOIN"),
    ],
)
def test_damage_is_one_clear_line(tmp_path, old, new, words):
    assert old in SU2
    with pytest.raises(FileError, match=words) as error:
        read_text(tmp_path, SU2.replace(old, new))
    assert "\n" not in str(error.value)


def test_ids_out_of_range_are_named(tmp_path):
    with pytest.raises(MeshError, match=r"a\.su2: .*row 0 lists point"):
        read_text(tmp_path, SU2.replace("5 0 1 4 0", "5 0 1 6 0"))


def test_tets_with_text_of_any_width_are_read(tmp_path):
    corners = "NDIME= 3\nNPOIN= 4 4\n0 0 0\n1e0\t0 0\n0 1. 0\n0 0 1\n"
    mesh = read_text(tmp_path, corners + "NELEM= 1\n10 0 1 2 3\nNMARK= 0\n")
    assert mesh.measures.tolist() == pytest.approx([1 / 6])
    write_tets(tmp_path / "b.vtu", "vtu")  # the same reader serves by content, not by name
    (tmp_path / "b.vtu").write_bytes((tmp_path / "a.su2").read_bytes())
    assert read_mesh(tmp_path / "b.vtu").n_cells == 1
