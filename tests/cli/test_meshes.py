"""The sample meshes: made again by `tools/make_meshes.py`, right as `meshes/README.md` tells."""

from __future__ import annotations

import re
import subprocess
import sys
from collections import Counter
from pathlib import Path

import numpy as np
import pytest

import sfcpart as api
from sfcpart.graph import components
from sfcpart.mesh.kinds import KINDS

ROOT = Path(__file__).resolve().parents[2]
NAMES = sorted(p.name for p in (ROOT / "meshes").iterdir() if p.suffix not in (".md", ".png"))


def _tool(name: str, *arguments: str) -> None:
    subprocess.run(
        [sys.executable, str(ROOT / "tools" / name), *arguments],
        check=True,
        timeout=300,
        env={"PYTHONPATH": str(ROOT), "PATH": ""},
        stdout=subprocess.DEVNULL,
    )


@pytest.fixture(scope="module")
def made(tmp_path_factory) -> Path:
    folder = tmp_path_factory.mktemp("meshes")
    _tool("make_meshes.py", str(folder))
    return folder


def test_five_kinds_of_meshes_are_there():
    assert len(NAMES) == 5
    assert {Path(name).suffix for name in NAMES} == {".msh", ".vtu", ".vtk", ".vtkhdf"}


@pytest.mark.parametrize("name", NAMES)
def test_the_tool_makes_the_same_values_again(name, made):
    ours, again = (api.read_mesh(folder / name) for folder in (ROOT / "meshes", made))
    assert (ROOT / "meshes" / name).stat().st_size < 200_000
    assert np.array_equal(ours.points, again.points)
    assert np.array_equal(ours.kind, again.kind)
    assert np.array_equal(ours.indptr, again.indptr)
    assert np.array_equal(ours.indices, again.indices)
    assert list(ours.cell_fields) == list(again.cell_fields)
    for field, values in ours.cell_fields.items():
        assert np.array_equal(values, again.cell_fields[field])
    assert [group.name for group in ours.boundary] == [group.name for group in again.boundary]


@pytest.mark.parametrize("name", NAMES)
def test_known_answers_in_the_readme_are_right(name):
    text = (ROOT / "meshes" / "README.md").read_text()
    row = re.search(rf"^\| `{re.escape(name)}` \|(.*)\|$", text, re.M)
    assert row is not None
    what, cells, size, pieces = (piece.strip() for piece in row.group(1).split("|"))
    mesh = api.read_mesh(ROOT / "meshes" / name)
    counts = Counter(KINDS[int(code)].name for code in mesh.kind)
    assert dict(counts) == {kind: int(n) for n, kind in re.findall(r"(\d+) ([a-z]+)", cells)}
    assert mesh.measures.sum() == pytest.approx(float(size.split()[0]), rel=1e-12)
    assert components(api.cell_graph(mesh))[0] == int(pieces)
    for group in mesh.boundary:
        told = re.search(rf"`{group.name}` \((\d+)", what)
        assert told is not None
        assert len(group.kind) == int(told.group(1))


def test_the_fin_makes_edges_of_three_cells():
    mesh = api.read_mesh(ROOT / "meshes" / "pier_shell.vtk")
    graph = api.cell_graph(mesh)
    sides = 4 * 480 + 3 * 36
    at_fin = 12  # edges with three cells: three pairs each, in place of one
    paired = (sides - int(graph.boundary_count.sum()) - 3 * at_fin) // 2
    assert graph.n_faces == paired + 3 * at_fin


@pytest.mark.parametrize(
    ("what", "ending"),
    [
        ("tets", "vtu"),
        ("hexes", "vtkhdf"),
        ("layers", "vtkhdf"),
        ("section", "vtk"),
        ("refined", "h5"),
    ],
)
@pytest.mark.parametrize("order", [[], ["--shuffle", "3"]], ids=["ordered", "shuffled"])
def test_big_meshes_are_made_at_any_size(what, ending, order, tmp_path):
    path = tmp_path / f"big.{ending}"
    _tool("make_big.py", what, "6000", str(path), *order)
    mesh = api.read_mesh(path)
    assert 3000 < mesh.n_cells < 12000
    assert components(api.cell_graph(mesh))[0] == 1
