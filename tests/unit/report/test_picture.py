"""Pictures: files that a PNG reader accepts, with every part's colour in them."""

from __future__ import annotations

import numpy as np
import pytest
from matplotlib.image import imread

from sfcpart.errors import FileError, InputError
from sfcpart.graph import cell_graph
from sfcpart.kernels._jit import COMPILED
from sfcpart.mesh.channel import channel_mixed, channel_section
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.refined import refined_box
from sfcpart.mesh.shapes import truncated_octahedra
from sfcpart.mesh.structures import pier_shell
from sfcpart.partition import Partition
from sfcpart.report.picture import draw_split

WIDTH = 300


@pytest.fixture(autouse=True)
def _coarser_without_compiler(monkeypatch):
    """Plain Python visits every pixel by itself: give it fewer of them."""
    if not COMPILED:
        monkeypatch.setattr("sfcpart.report.painting.FINE", 1)


def _strips(mesh: Mesh, n_parts: int) -> Partition:
    order = np.argsort(mesh.centers[:, 0], kind="stable")
    part = np.empty(mesh.n_cells, int)
    part[order] = np.arange(mesh.n_cells) * n_parts // mesh.n_cells
    return Partition.from_array(part, n_parts)


@pytest.mark.parametrize(
    "make",
    [
        lambda: channel_section(20, 4).to_mesh(),
        lambda: pier_shell(12, 4, fin=1).to_mesh(),
        lambda: channel_mixed((6, 3)).to_mesh(),
        lambda: truncated_octahedra((2, 2, 2)).to_mesh(),
        lambda: refined_box(4, n_levels=1).to_mesh(),
    ],
)
def test_every_sort_of_mesh_is_drawn(make, tmp_path):
    mesh = make()
    path = tmp_path / "parts.png"
    draw_split(
        path, mesh, partition=_strips(mesh, 3), graph=cell_graph(mesh), title="x", width=WIDTH
    )
    image = imread(path)
    assert image.shape[1] == WIDTH
    assert (image[..., :3].min(axis=2) < 0.9).mean() > 0.05  # something is there


@pytest.mark.parametrize("dim", [2, 3])
def test_bare_centres_are_drawn_without_a_graph(dim, tmp_path):
    mesh = Mesh.from_centers(np.random.default_rng(1).random((60, dim)))
    draw_split(tmp_path / "a.png", mesh, partition=_strips(mesh, 4), width=WIDTH)
    assert imread(tmp_path / "a.png").shape[1] == WIDTH


def test_touching_parts_are_shown_in_their_two_colours(tmp_path):
    mesh = channel_section(20, 4).to_mesh()
    draw_split(
        tmp_path / "a.png", mesh, partition=_strips(mesh, 2), graph=cell_graph(mesh), width=400
    )
    pixels = np.rint(imread(tmp_path / "a.png")[..., :3] * 255).astype(int).reshape(-1, 3)
    counts = {tuple(c): (pixels == c).all(axis=1).sum() for c in ([230, 159, 0], [86, 180, 233])}
    assert min(counts.values()) > 1000


def test_a_ring_without_boundary_is_drawn_whole(tmp_path):
    ring = np.arange(8)
    angle = 2 * np.pi * ring / 8
    centers = np.stack([np.cos(angle), np.sin(angle), 0.1 * angle], axis=1)
    pairs = np.stack([ring, (ring + 1) % 8], axis=1)
    mesh = Mesh.from_faces(pairs, np.ones(8), centers, np.full(8, 0.05))
    for n_parts in (1, 2):
        path = tmp_path / f"{n_parts}.png"
        draw_split(
            path, mesh, partition=_strips(mesh, n_parts), graph=cell_graph(mesh), width=WIDTH
        )
        assert (imread(path)[..., :3].min(axis=2) < 0.9).any()


def test_an_empty_part_is_no_obstacle(tmp_path):
    mesh = channel_section(10, 2).to_mesh()
    partition = Partition.from_array(np.zeros(mesh.n_cells, int), 5)
    draw_split(tmp_path / "a.png", mesh, partition=partition, graph=cell_graph(mesh), width=WIDTH)
    assert (tmp_path / "a.png").stat().st_size > 1000


def test_a_plane_mesh_with_three_coordinates_looks_like_one_with_two(tmp_path):
    shape = channel_section(20, 4)
    flat = shape.to_mesh()
    padded = Mesh.from_arrays(np.pad(shape.points, ((0, 0), (0, 1))), dict(shape.cells))
    for name, mesh in {"2": flat, "3": padded}.items():
        path = tmp_path / f"{name}.png"
        draw_split(path, mesh, partition=_strips(mesh, 3), graph=cell_graph(mesh), width=WIDTH)
    assert np.array_equal(imread(tmp_path / "2.png"), imread(tmp_path / "3.png"))


def test_a_single_flat_cell_is_drawn(tmp_path):
    mesh = Mesh.from_arrays(
        np.array([[0.0, 0], [1, 0], [0, 1]]), {"triangle": np.array([[0, 1, 2]])}
    )
    draw_split(tmp_path / "a.png", mesh, partition=Partition.from_array([0]), width=WIDTH)
    assert (tmp_path / "a.png").exists()


def test_wrong_requests_are_refused(tmp_path):
    mesh = channel_section(10, 2).to_mesh()
    with pytest.raises(InputError, match="wanted the same"):
        draw_split(tmp_path / "a.png", mesh, partition=Partition.from_array([0, 1]))
    with pytest.raises(InputError, match="at least 300"):
        draw_split(tmp_path / "a.png", mesh, partition=_strips(mesh, 2), width=10)
    with pytest.raises(FileError, match="cannot be written"):
        draw_split(tmp_path / "no" / "a.png", mesh, partition=_strips(mesh, 2), width=WIDTH)
