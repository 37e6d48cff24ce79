"""Splits side by side: a panel each, drawn as `draw_split` draws it."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.image import imread
from scipy.ndimage import find_objects, label

from sfcpart.errors import FileError, InputError
from sfcpart.graph import cell_graph
from sfcpart.kernels._jit import COMPILED
from sfcpart.mesh.channel import channel_section
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.shapes import lattice
from sfcpart.partition import Partition
from sfcpart.report.side_by_side import DrawnSplit, draw_side_by_side

WIDTH = 600


@pytest.fixture(autouse=True)
def _coarser_without_compiler(monkeypatch):
    """Plain Python visits every pixel by itself: give it fewer of them."""
    if not COMPILED:
        monkeypatch.setattr("sfcpart.report.painting.FINE", 1)


def _splits(mesh: Mesh, count: int, n_parts: int = 3) -> list[DrawnSplit]:
    """Cut along different axes."""
    found = []
    for k in range(count):
        order = np.argsort(mesh.centers[:, k % mesh.space_dim], kind="stable")
        part = np.empty(mesh.n_cells, int)
        part[order] = np.arange(mesh.n_cells) * n_parts // mesh.n_cells
        figures = {"imbalance": 0.01 * k, "cut_faces": 10 * k}
        found.append(DrawnSplit(f"way {k}", Partition.from_array(part, n_parts), figures))
    return found


def _panels(path) -> list[tuple[slice, slice]]:
    """Find large connected things on the white sheet; letters are small."""
    spots, _ = label((imread(path)[..., :3] < 0.95).any(axis=2))
    size = np.bincount(spots.ravel())
    return [box for k, box in enumerate(find_objects(spots), 1) if size[k] > 2000]


@pytest.mark.parametrize(("count", "rows"), [(1, 1), (2, 1), (3, 1), (4, 2), (5, 2), (8, 3)])
def test_there_is_a_panel_for_each_split(count, rows, tmp_path):
    mesh = lattice((6, 6)).to_mesh()
    path = tmp_path / "a.png"
    draw_side_by_side(
        path, mesh, splits=_splits(mesh, count), graph=cell_graph(mesh), title="x", width=WIDTH
    )
    panels = _panels(path)
    assert len(panels) == count
    assert len({box[0].start for box in panels}) == rows
    assert imread(path).shape[1] == WIDTH


def test_wide_meshes_are_stacked(tmp_path):
    mesh = channel_section(30, 4).to_mesh()
    path = tmp_path / "a.png"
    draw_side_by_side(path, mesh, splits=_splits(mesh, 3), graph=cell_graph(mesh), width=WIDTH)
    panels = _panels(path)
    assert len({box[0].start for box in panels}) == len(panels) == 3


def test_parts_of_solid_meshes_are_pulled_apart(tmp_path, monkeypatch):
    monkeypatch.setattr("sfcpart.report.views.PULL", 4.0)  # farther than parts hide each other
    mesh = lattice((6, 6, 6)).to_mesh()
    path = tmp_path / "a.png"
    draw_side_by_side(
        path, mesh, splits=_splits(mesh, 2, n_parts=2), graph=cell_graph(mesh), width=900
    )
    assert len(_panels(path)) == 4  # two parts in each of two panels


def test_each_panel_is_coloured_by_the_rule_for_one(tmp_path):
    mesh = lattice((6, 6)).to_mesh()
    path = tmp_path / "a.png"
    draw_side_by_side(path, mesh, splits=_splits(mesh, 2, n_parts=2), graph=cell_graph(mesh))
    pixels = np.rint(imread(path)[..., :3] * 255).astype(int)
    # Okabe and Ito's orange and sky blue (2008, from memory), as in the test of one picture
    for box in _panels(path):
        flat = pixels[box].reshape(-1, 3)
        for colour in ([230, 159, 0], [86, 180, 233]):
            assert (flat == colour).all(axis=1).mean() > 0.3


def test_long_words_stay_on_the_sheet(tmp_path):
    mesh = lattice((4, 4)).to_mesh()
    (split,) = _splits(mesh, 1)
    path = tmp_path / "a.png"
    long = split._replace(name="a very long name of a partition from elsewhere, " * 3)
    draw_side_by_side(path, mesh, splits=[long, split, split], title="t" * 200, width=WIDTH)
    edge = imread(path)[:, [0, 1, -2, -1], :3]
    assert edge.min() > 0.95


def test_wrong_requests_are_refused(tmp_path):
    mesh = lattice((4, 4)).to_mesh()
    splits = _splits(mesh, 2)
    with pytest.raises(InputError, match="at least one"):
        draw_side_by_side(tmp_path / "a.png", mesh, splits=[])
    other = DrawnSplit("other", Partition.from_array([0, 1]), {})
    with pytest.raises(InputError, match="wanted the same"):
        draw_side_by_side(tmp_path / "a.png", mesh, splits=[*splits, other])
    with pytest.raises(InputError, match="at least 300"):
        draw_side_by_side(tmp_path / "a.png", mesh, splits=splits, width=10)
    with pytest.raises(FileError, match="cannot be written"):
        draw_side_by_side(tmp_path / "no" / "a.png", mesh, splits=splits, width=WIDTH)
