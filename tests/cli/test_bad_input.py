"""Whatever is wrong: one clear line, the documented code, nothing left behind, no traceback."""

from __future__ import annotations

import os
import shutil
from pathlib import Path

import meshio
import numpy as np
import pytest

POINTS = np.array([[0.0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [2, 0, 0], [2, 1, 0]])
QUADS = np.array([[0, 1, 2, 3], [1, 4, 5, 2]])


def _write(name: str, *, points=POINTS, cells=QUADS, **fields) -> None:
    data = {key: [np.asarray(value)] for key, value in fields.items()}
    meshio.Mesh(points, [("quad", cells)], cell_data=data).write(name)


def _nan_point() -> None:
    points = POINTS.copy()
    points[4, 1] = np.nan
    _write("a.vtu", points=points)


def _infinite_point() -> None:
    points = POINTS.copy()
    points[2, 0] = np.inf
    _write("a.vtk", points=points)


def _cut() -> None:
    whole = Path("meshes/channel_mixed.vtu").read_bytes()
    Path("a.vtu").write_bytes(whole[: len(whole) // 2])


def _cut_hdf() -> None:
    whole = Path("meshes/kelvin_cells.vtkhdf").read_bytes()
    Path("a.vtkhdf").write_bytes(whole[:9000])


def _noise(name: str):
    return lambda: Path(name).write_bytes(np.random.default_rng(1).bytes(5000))


def _weights(*values: float):
    return lambda: _write("a.vtu", w=np.array(values))


def _text(name: str, text: str):
    return lambda: Path(name).write_text(text)


def _no_cells() -> None:
    lines = ["# vtk DataFile Version 3.0", "empty", "ASCII", "DATASET UNSTRUCTURED_GRID"]
    lines += ["POINTS 1 double", "0 0 0", "CELLS 0 0", "CELL_TYPES 0", ""]
    Path("a.vtk").write_text("\n".join(lines))


def nothing() -> None:
    pass


BAD = [
    # what makes the file, command line, exit code, words of the message
    (nothing, "split no.vtu -n 2", 4, "no.vtu: cannot be read: No such file"),
    (nothing, "split meshes -n 2", 4, "is a folder"),
    (_text("a.vtu", ""), "split a.vtu -n 2", 4, "is empty"),
    (_text("a.xyz", "hello"), "split a.xyz -n 2", 4, "unknown format"),
    (_noise("a.vtu"), "split a.vtu -n 2", 4, "a.vtu"),
    (_noise("a.msh"), "split a.msh -n 2", 4, "a.msh"),
    (_noise("a.vtkhdf"), "split a.vtkhdf -n 2", 4, "a.vtkhdf"),
    (_cut, "split a.vtu -n 2", 4, "a.vtu"),
    (_cut_hdf, "split a.vtkhdf -n 2", 4, "a.vtkhdf"),
    (_no_cells, "split a.vtk -n 2", 3, "no cells"),
    (_nan_point, "split a.vtu -n 2", 3, "point 4"),
    (_infinite_point, "split a.vtk -n 2", 3, "point 2"),
    (lambda: _write("a.vtu", cells=QUADS + 1), "split a.vtu -n 2", 3, "6"),
    (nothing, "split meshes/kelvin_cells.vtkhdf -n 73", 5, "72 cells"),
    (_weights(0, 0), "split a.vtu -n 2 --weight w", 3, "weight"),
    (_weights(1, -1), "split a.vtu -n 2 --weight w", 3, "cell 1"),
    (_weights(np.nan, 1), "split a.vtu -n 2 --weight w", 3, "cell 0"),
    (_weights(1, np.inf), "split a.vtu -n 2 --weight w", 3, "cell 1"),
    (nothing, "split meshes/channel_mixed.vtu -n 2 --weight cost", 3, "work"),
    (nothing, "split meshes/channel_mixed.vtu -n 2 --weight blob=3", 3, "blob"),
    (nothing, "split meshes/channel_mixed.vtu -n 2 --together zone", 3, "row"),
    (nothing, "split meshes/channel_section.msh -n 2 --periodic a:b", 3, "inflow"),
    (nothing, "split meshes/channel_mixed.vtu -n 4 --limit memory:10", 5, "limit"),
    (nothing, "split meshes/turbine.vtu -n 2 --together body --limit 1:700", 5, "limit"),
    (nothing, "split meshes/turbine.vtu -n 2 --speeds 1,0", 3, "speed of part 1"),
    (nothing, "split meshes/turbine.vtu -n 2 --speeds 1,1,1", 3, "2 parts"),
    (nothing, "split meshes/turbine.vtu -n 2 --merge-points -1", 3, "-1"),
    (nothing, "split meshes/turbine.vtu -n 2 --latency -1", 3, "latency"),
    (nothing, "split meshes/turbine.vtu -n 2 --tolerance -1", 3, "tolerance"),
    (nothing, "split meshes/turbine.vtu -n 2 --pairs no.txt", 4, "no.txt"),
    (_text("p.txt", "1 x\n"), "split meshes/turbine.vtu -n 2 --pairs p.txt", 4, "p.txt"),
    (_text("p.txt", "1 5000\n"), "split meshes/turbine.vtu -n 2 --pairs p.txt", 3, "5000"),
    (_text("out", "mine"), "split meshes/turbine.vtu -n 2 -o out", 4, "out: is a file"),
    (nothing, "split meshes/turbine.vtu -n 2 -o /proc/parts", 4, "/proc/parts"),
    (nothing, "split meshes/turbine.vtu -n 2 -o meshes --overwrite", 4, "sfcpart did not write it"),
    (nothing, "assess meshes/turbine.vtu --field zone", 3, "body"),
    (nothing, "assess meshes/channel_mixed.vtu --field work", 5, "whole numbers"),
    (_text("p.txt", "0\n1\n"), "assess meshes/turbine.vtu p.txt", 3, "1008"),
    (_text("p.txt", "0\nx\n"), "assess meshes/turbine.vtu p.txt", 4, "p.txt"),
    (nothing, "assess meshes/turbine.vtu no.npy", 4, "no.npy"),
    (nothing, "assess meshes/turbine.vtu meshes", 4, "parts.vtkhdf"),
    (nothing, "inspect no.vtu", 4, "No such file"),
    (nothing, "compare no.vtu -n 2", 4, "No such file"),
    (nothing, "compare meshes/turbine.vtu -n 2 --given hilbert:body", 3, "hilbert"),
    (nothing, "compare meshes/turbine.vtu -n 2 --given a:zone", 4, "zone"),
    (nothing, "assess meshes/turbine.vtu --field body --csv no/a.csv", 4, "no/a.csv: cannot be"),
    (nothing, "assess meshes/turbine.vtu --field body --csv meshes", 4, "meshes: cannot be"),
    (nothing, "assess meshes/turbine.vtu --field body --picture no/a.png", 4, "no/a.png: cannot"),
    (nothing, "compare meshes/turbine.vtu -n 2 -m rows --csv no/a.csv", 4, "no/a.csv: cannot be"),
    # wrong command lines
    (nothing, "compare meshes/turbine.vtu", 2, "--parts"),
    (nothing, "compare meshes/turbine.vtu -n 2 --method magic", 2, "hilbert"),
    (nothing, "figures magic", 2, "magic"),
    (nothing, "nonsense", 2, "nonsense"),
    (nothing, "split", 2, "MESH"),
    (nothing, "split meshes/turbine.vtu", 2, "--parts"),
    (nothing, "split meshes/turbine.vtu -n 0", 2, "0"),
    (nothing, "split meshes/turbine.vtu -n two", 2, "two"),
    (nothing, "split meshes/turbine.vtu -n 7 --levels 2x3", 2, "6 parts"),
    (nothing, "split meshes/turbine.vtu --levels 2x", 2, "2x"),
    (nothing, "split meshes/turbine.vtu -n 2 --method magic", 2, "hilbert"),
    (nothing, "split meshes/turbine.vtu -n 2 --network magic", 2, "shared-memory"),
    (nothing, "split meshes/turbine.vtu -n 2 --picture", 2, "-o DIR"),
    (nothing, "split meshes/turbine.vtu -n 2 --limit memory", 2, "memory:300"),
    (nothing, "split meshes/turbine.vtu -n 2 --speeds fast", 2, "fast"),
    (nothing, "split meshes/turbine.vtu -n 2 --threads 0", 2, "threads"),
    (nothing, "assess meshes/turbine.vtu", 2, "--field"),
    (nothing, "completion tcsh", 2, "tcsh"),
]


@pytest.mark.parametrize(("make", "line", "code", "words"), BAD, ids=[row[1] for row in BAD])
def test_bad_input_is_one_clear_line(sfcpart, tmp_path, make, line, code, words):
    make()
    before = sorted(entry.name for entry in tmp_path.iterdir())
    ended = sfcpart(line)
    assert ended.code == code, ended.err
    assert ended.out == ""
    assert ended.err.startswith("sfcpart: error: ")
    assert ended.err.count("\n") == 1
    assert "Traceback" not in ended.err
    assert words in ended.err
    assert sorted(entry.name for entry in tmp_path.iterdir()) == before


def test_huge_weights_still_balance_or_are_refused(sfcpart):
    _write("a.vtu", w=np.array([1e300, 1e300]))
    ended = sfcpart("split a.vtu -n 2 --weight w")
    assert ended.code == 0
    assert "no part of 2 carries more" in ended.out


@pytest.mark.parametrize("verb", ["split -n 2", "inspect", "compare -n 2"])
def test_a_mesh_too_large_for_the_memory_is_refused_before_it_is_read(sfcpart, monkeypatch, verb):
    monkeypatch.setattr("sfcpart.memory.memory_left", lambda: 1000)
    monkeypatch.setattr("sfcpart.memory.resident_memory", lambda: 100_000_000)
    monkeypatch.setattr("sfcpart.files.meshes.read.read_mesh", None)
    ended = sfcpart(f"{verb} meshes/kelvin_cells.vtkhdf")
    assert ended.code == 6
    assert "a split needs about 0.2 GB of memory, 0.1 GB are there" in ended.err
    assert ended.err.count("\n") == 1


def test_other_formats_are_refused_once_their_size_is_known(sfcpart, monkeypatch):
    monkeypatch.setattr("sfcpart.memory.memory_left", lambda: 1000)
    monkeypatch.setattr("sfcpart.memory.resident_memory", lambda: 100_000_000)
    ended = sfcpart("split meshes/turbine.vtu -n 2 -o parts")
    assert (ended.code, Path("parts").exists()) == (6, False)


def test_an_unreadable_file_is_named(sfcpart):
    shutil.copy("meshes/turbine.vtu", "a.vtu")
    Path("a.vtu").chmod(0)
    if os.access("a.vtu", os.R_OK):
        pytest.skip("this user may read everything")
    ended = sfcpart("split a.vtu -n 2")
    assert ended.code == 4
    assert "a.vtu: cannot be read: Permission denied" in ended.err


def test_an_output_place_without_permission_is_refused_before_the_work(sfcpart):
    Path("locked").mkdir(0o500)
    if os.access("locked", os.W_OK):
        pytest.skip("this user may write everywhere")
    ended = sfcpart("split meshes/turbine.vtu -n 2 -o locked/parts")
    assert ended.code == 4
    assert "may not be written" in ended.err
