"""Faces to draw against counts that follow from the lattice."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.graph import cell_graph
from sfcpart.mesh.channel import channel_mixed, channel_section
from sfcpart.mesh.shapes import jittered_tets, lattice, truncated_octahedra
from sfcpart.mesh.structures import pier_shell
from sfcpart.report.surface import cell_triangles, part_surface


def _area(corners: np.ndarray) -> float:
    if corners.shape[2] == 2:
        corners = np.pad(corners, ((0, 0), (0, 0), (0, 1)))
    normal = np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
    return float(np.linalg.norm(normal, axis=1).sum() / 2)


@pytest.mark.parametrize("make", [lambda: channel_section(20, 6), lambda: pier_shell(12, 4, fin=2)])
def test_cells_in_2d_cover_their_area(make):
    mesh = make().to_mesh()
    triangles = cell_triangles(mesh)
    assert _area(triangles.corners) == pytest.approx(mesh.measures.sum())
    covered = np.bincount(triangles.cell, minlength=mesh.n_cells)
    assert covered.min() >= 1


def test_halved_box_shows_its_outside_and_the_cut_from_both_sides():
    mesh = lattice((4, 3, 2)).to_mesh()
    part = np.tile([0, 0, 1, 1], 6)
    rim = part_surface(mesh, part, graph=cell_graph(mesh))
    assert _area(rim.corners[rim.is_outer]) == pytest.approx(2 * (12 + 6 + 8))
    assert _area(rim.corners[~rim.is_outer]) == pytest.approx(2 * 6)
    cut = rim.corners[~rim.is_outer]
    assert (cut[:, :, 0] == 2).all()


def test_one_part_shows_only_the_outside():
    mesh = jittered_tets((3, 3, 3)).to_mesh()
    rim = part_surface(mesh, np.zeros(mesh.n_cells, int), graph=cell_graph(mesh))
    assert rim.is_outer.all()
    assert len(rim.cell) == 6 * 9 * 2
    assert _area(rim.corners) == pytest.approx(6 * 9)


@pytest.mark.parametrize(
    "make", [lambda: channel_mixed((6, 4)), lambda: truncated_octahedra((3, 2, 2))]
)
def test_drawn_area_is_the_measure_the_graph_knows(make):
    mesh = make().to_mesh()
    graph = cell_graph(mesh)
    part = (mesh.centers[:, 0] > mesh.centers[:, 0].mean()).astype(int)
    rim = part_surface(mesh, part, graph=graph)
    row = np.repeat(np.arange(mesh.n_cells), np.diff(graph.indptr))
    cut = graph.data[part[row] != part[graph.indices]].sum()
    assert _area(rim.corners[rim.is_outer]) == pytest.approx(graph.boundary_measure.sum())
    assert _area(rim.corners[~rim.is_outer]) == pytest.approx(cut)
