"""Triangles for a page: packed without loss of place, thinned by the rule that the page states."""

import base64

import numpy as np
import pytest

import sfcpart
from sfcpart.graph import cell_graph
from sfcpart.mesh.shapes import jittered_tets, lattice
from sfcpart.report import surface as surface_module
from sfcpart.report.page import scene as scene_module
from sfcpart.report.page.scene import pack_scene, thin_triangles
from sfcpart.report.page.space import view_section
from sfcpart.report.surface import cell_triangles, part_surface


def unpacked(scene):
    """Read a scene as a browser does: corners of each triangle, and the part of each."""
    position = np.frombuffer(base64.b64decode(scene["position"]), "<u2").reshape(-1, 3)
    kind = "<u4" if scene["wide"] else "<u2"
    index = np.frombuffer(base64.b64decode(scene["index"]), kind).reshape(-1, 3).astype(int)
    part = np.repeat(np.arange(len(scene["triangles"])), scene["triangles"])
    start = np.cumsum(scene["points"]) - scene["points"]
    assert len(position) == sum(scene["points"])
    return position[index + start[part][:, None]], part


@pytest.fixture(scope="module")
def solid():
    mesh = jittered_tets((6, 5, 4)).to_mesh()
    return mesh, sfcpart.split(mesh, 5)


def test_a_packed_scene_has_every_triangle_where_it_was(solid):
    mesh, parts = solid
    surface = part_surface(mesh, parts.cell_part, graph=cell_graph(mesh))
    shape = thin_triangles(surface, parts.cell_part)
    assert shape.lattice == 0
    corners, part = unpacked(pack_scene(shape, n_parts=5, dim=3, colour=np.zeros((5, 3))))
    order = np.argsort(parts.cell_part[surface.cell], kind="stable")
    assert np.array_equal(part, parts.cell_part[surface.cell][order])
    place = shape.low + shape.step * corners
    assert np.abs(place - surface.corners[order]).max() <= 0.51 * shape.step


def test_a_flat_scene_lies_in_the_plane():
    mesh = lattice((5, 4)).to_mesh()
    shape = thin_triangles(cell_triangles(mesh), np.zeros(20, int))
    corners, _ = unpacked(pack_scene(shape, n_parts=1, dim=2, colour=np.ones((1, 3))))
    assert corners[..., 2].max() == 0
    assert corners[..., 0].max() == 65535
    flat = corners[..., :2].astype(float)
    a, b = flat[:, 1] - flat[:, 0], flat[:, 2] - flat[:, 0]
    area = np.abs(a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]).sum() / 2
    assert area == pytest.approx(65535**2 * 4 / 5, rel=1e-4)


def test_thinning_keeps_below_the_most_and_parts_still_meet(solid):
    mesh, parts = solid
    surface = part_surface(mesh, parts.cell_part, graph=cell_graph(mesh))
    shape = thin_triangles(surface, parts.cell_part, most=300)
    assert 50 < len(shape.part) <= 300
    assert shape.n_before == len(surface.cell)
    assert shape.lattice >= 3
    assert np.all(np.diff(shape.part) >= 0)
    # A triangle inside is there from both sides, but for some of pieces one cell thin.
    inner = np.sort(
        shape.corners[~shape.is_outer].reshape(-1, 3, 3) @ [1, 1 << 17, 1 << 34], axis=1
    )
    _, count = np.unique(inner, axis=0, return_counts=True)
    assert np.mean(count == 2) > 0.8
    # No triangle has lost a side, and none of a part is there twice.
    key = np.sort(shape.corners @ [1, 1 << 17, 1 << 34], axis=1)
    assert np.all(np.diff(key, axis=1) > 0)
    assert len(np.unique(np.column_stack([shape.part, key]), axis=0)) == len(key)


def test_thinning_is_the_same_in_any_order_of_the_triangles(solid):
    mesh, parts = solid
    surface = part_surface(mesh, parts.cell_part, graph=cell_graph(mesh))
    turned = type(surface)(*(column[::-1] for column in vars(surface).values()))
    one, two = (thin_triangles(s, parts.cell_part, most=300) for s in (surface, turned))
    assert one.lattice == two.lattice
    sides = [
        np.unique(
            np.column_stack([s.part, np.sort(s.corners @ [1, 1 << 17, 1 << 34], axis=1)]), axis=0
        )
        for s in (one, two)
    ]
    assert np.array_equal(*sides)


def test_a_mesh_of_one_point_is_packed():
    mesh = sfcpart.Mesh.from_centers(np.zeros((3, 2)), measures=np.zeros(3))
    parts = sfcpart.split(mesh, 3)
    view = view_section(
        mesh, parts, assessment=sfcpart.assess(mesh, parts), graph=None, levels=None
    )
    assert len(view.scene["triangles"]) == 3


def test_levels_and_the_rule_are_told(solid, monkeypatch):
    mesh, _ = solid
    parts = sfcpart.split(mesh, 8, levels=(2, 4))
    monkeypatch.setattr("sfcpart.report.painting.FINE", 1)
    monkeypatch.setattr("sfcpart.report.page.still.WIDTH", 60)
    how = {"assessment": sfcpart.assess(mesh, parts), "graph": cell_graph(mesh), "levels": (2, 4)}
    view = view_section(mesh, parts, **how)
    assert view.levels["level 1 of 2"].tolist() == [0] * 4 + [1] * 4
    assert view.note.startswith("All ")
    monkeypatch.setattr("sfcpart.report.page.space.MOST_TRIANGLES", 200)
    note = view_section(mesh, parts, **how).note
    assert "steps along the longest side" in note
    monkeypatch.setattr("sfcpart.report.page.space.MOST_TRIANGLES", 10)
    assert "too small to be seen" in view_section(mesh, parts, **how).note


def test_cells_of_a_lattice_are_numbered_alike_by_table_and_by_sorting(monkeypatch):
    key = np.random.default_rng(2).integers(0, 27, 50)
    by_table = scene_module._numbered(key, 3)
    monkeypatch.setattr(scene_module, "_TABLE", 1)
    assert np.array_equal(scene_module._numbered(key, 3), by_table)


def test_faces_of_meshes_with_very_many_points_are_matched_too():
    big = 1 << 22
    low, middle, high = np.array([[3, 5, big], [1, 2, 3], [3, 5, big]]).T
    for shift in (0, big):  # beyond 21 bits, and within
        columns = (low, middle, np.where(high > big - 1, high - shift, high))
        order = surface_module._sorted_rows(*columns)
        assert sorted(order.tolist()) == [0, 1, 2]
        assert abs(order.tolist().index(0) - order.tolist().index(2)) == 1
