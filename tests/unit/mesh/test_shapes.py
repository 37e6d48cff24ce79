"""Meshes made by rule: counts, volumes and conformity that follow from the rule itself."""

from __future__ import annotations

from collections import Counter
from itertools import pairwise

import numpy as np
import pytest

from sfcpart.errors import InputError
from sfcpart.mesh.channel import (
    channel_mixed,
    channel_section,
    channel_water,
    section_area,
)
from sfcpart.mesh.refined import refined_box
from sfcpart.mesh.shape import Shape, extrude
from sfcpart.mesh.shapes import jittered_tets, lattice, truncated_octahedra
from sfcpart.mesh.structures import channel_with_rotor, pier_shell

# Faces of each 3-D cell, written down here again from the VTK file-format document's figures.
FACES = {
    "tetra": [[0, 2, 1], [0, 1, 3], [1, 2, 3], [0, 3, 2]],
    "pyramid": [[0, 3, 2, 1], [0, 1, 4], [1, 2, 4], [2, 3, 4], [3, 0, 4]],
    "wedge": [[0, 1, 2], [3, 5, 4], [0, 3, 4, 1], [1, 4, 5, 2], [2, 5, 3, 0]],
    "hexahedron": [
        [0, 3, 2, 1],
        [4, 5, 6, 7],
        [0, 1, 5, 4],
        [1, 2, 6, 5],
        [2, 3, 7, 6],
        [3, 0, 4, 7],
    ],
}


def enclosed_volume(shape: Shape) -> tuple[np.ndarray, Counter]:
    """Volume of each cell by the divergence theorem over fan triangles, and uses of each face."""
    volumes, uses = [], Counter()
    for name, block in shape.cells.items():
        for cell in np.asarray(block):
            volume = 0.0
            for local in FACES[name]:
                face = cell[local]
                uses[tuple(sorted(face.tolist()))] += 1
                corner = shape.points[face]
                middle = corner.mean(axis=0)
                for a, b in zip(corner, np.roll(corner, -1, axis=0), strict=True):
                    volume += np.dot(middle, np.cross(a, b)) / 6
            volumes.append(volume)
    return np.array(volumes), uses


def polygon_areas(shape: Shape) -> np.ndarray:
    """Signed areas of 2-D cells by the shoelace formula."""
    areas = []
    for block in shape.cells.values():
        x, y = shape.points[block, 0], shape.points[block, 1]
        areas.append(np.sum(x * np.roll(y, -1, 1) - y * np.roll(x, -1, 1), axis=1) / 2)
    return np.concatenate(areas)


def test_lattice_has_unit_cells_first_axis_fastest():
    flat = lattice((3, 2))
    assert flat.cells["quad"][1].tolist() == [1, 2, 6, 5]
    assert polygon_areas(flat).tolist() == [1.0] * 6
    volumes, uses = enclosed_volume(lattice((4, 3, 2), size=(8.0, 3.0, 2.0)))
    np.testing.assert_allclose(volumes, 2.0)
    assert sum(n == 2 for n in uses.values()) == 3 * 3 * 2 + 4 * 2 * 2 + 4 * 3 * 1
    assert max(uses.values()) == 2


def test_jittered_tets_fill_the_box_and_conform():
    shape = jittered_tets((4, 3, 2), jitter=1 / 6, seed=3)
    volumes, uses = enclosed_volume(shape)
    assert volumes.min() > 0
    assert volumes.sum() == pytest.approx(24.0, rel=1e-12)
    outer = 2 * 2 * (4 * 3 + 3 * 2 + 4 * 2)
    assert Counter(uses.values()) == {1: outer, 2: (4 * 144 - outer) // 2}


def test_section_matches_the_area_under_its_columns():
    shape = channel_section(40, 8)
    areas = polygon_areas(shape)
    assert areas.min() > 0
    assert areas.sum() == pytest.approx(section_area(40, n_up=8), rel=1e-12)
    assert polygon_areas(channel_section(30, 6, pier=False)).sum() == pytest.approx(
        section_area(30, pier=False), rel=1e-12
    )


def test_section_boundary_groups_are_exactly_its_outer_edges():
    shape = channel_section(20, 6)
    uses = Counter(
        tuple(sorted((int(a), int(b))))
        for block in shape.cells.values()
        for cell in block
        for a, b in zip(cell, np.roll(cell, -1), strict=True)
    )
    named = [tuple(sorted(edge)) for group in shape.boundary.values() for edge in group.tolist()]
    assert sorted(named) == sorted(edge for edge, n in uses.items() if n == 1)
    assert max(uses.values()) == 2


def test_section_layers_are_stretched_and_dearer():
    shape = channel_section(20, 6)
    quads = shape.points[shape.cells["quad"]]
    height = quads[:, 3, 1] - quads[:, 0, 1]
    width = quads[:, 1, 0] - quads[:, 0, 0]
    assert (width / height).max() > 20
    assert set(shape.cell_fields["work"][: len(quads)]) == {1.5}
    assert set(shape.cell_fields["work"][len(quads) :]) == {1.0, 1.25}


def test_extrusion_multiplies_area_by_width():
    shape = channel_water(20, 6, n_across=3, width=12.0)
    volumes, uses = enclosed_volume(shape)
    assert list(shape.cells) == ["hexahedron", "wedge"]
    assert volumes.min() > 0
    assert volumes.sum() == pytest.approx(12.0 * section_area(20, n_up=6), rel=1e-12)
    assert max(uses.values()) == 2
    assert all(uses[tuple(sorted(face))] == 1 for face in shape.boundary["bed"].tolist())


def test_extruded_fields_follow_their_cells():
    flat = channel_section(12, 4)
    swept = extrude(flat, [0.0, 1.0, 2.0])
    n_quads = len(flat.cells["quad"])
    assert (swept.cell_fields["region"][: 2 * n_quads] == 1).all()
    assert swept.n_cells == 2 * flat.n_cells == len(swept.cell_fields["work"])


def test_mixed_cells_conform_and_fill_the_channel():
    shape = channel_mixed((6, 4), rows=(1, 2, 2))
    volumes, uses = enclosed_volume(shape)
    n = 24
    counts = {name: len(block) for name, block in shape.cells.items()}
    assert counts == {
        "wedge": 2 * n,
        "hexahedron": 2 * n,
        "pyramid": 5 * n,
        "tetra": 2 * n + 12 * n,
    }
    assert volumes.min() > 0
    assert volumes.sum() == pytest.approx(12.0 * section_area(6, pier=False), rel=1e-12)
    assert max(uses.values()) == 2
    assert sum(k == 1 for k in uses.values()) == 240  # counted by hand, row by row


def test_pier_shell_area_and_fin():
    shape = pier_shell(24, 6, fin=3)
    side = 24 * 2 * 2.0 * np.sin(np.pi / 24) * 5.0
    cap = 24 * 0.5 * 2.0**2 * np.sin(2 * np.pi / 24)
    total = 0.0
    uses: Counter = Counter()
    for block in shape.cells.values():
        for cell in block:
            corner = shape.points[cell]
            total += np.linalg.norm(
                sum(np.cross(a, b) for a, b in zip(corner, np.roll(corner, -1, 0), strict=True)) / 2
            )
            uses.update(
                tuple(sorted(map(int, e))) for e in zip(cell, np.roll(cell, -1), strict=True)
            )
    assert total == pytest.approx(side + cap + 1.5 * 5.0, rel=1e-12)
    assert sum(n == 3 for n in uses.values()) == 6
    assert (
        max(
            Counter(
                tuple(sorted(map(int, e)))
                for block in pier_shell(24, 6).cells.values()
                for cell in block
                for e in zip(cell, np.roll(cell, -1), strict=True)
            ).values()
        )
        == 2
    )


def test_two_bodies_touch_nowhere():
    shape = channel_with_rotor(8)
    volumes, uses = enclosed_volume(shape)
    rotor = 12 * 0.5 * 1.6**2 * np.sin(2 * np.pi / 12) * 0.8
    body = shape.cell_fields["body"]
    assert volumes.min() > 0
    assert volumes[body == 0].sum() == pytest.approx(16 * 64 - 4 * 4 * 4)
    assert volumes[body == 1].sum() == pytest.approx(rotor)
    assert max(uses.values()) == 2
    flat = [np.asarray(cell) for block in shape.cells.values() for cell in block]
    used = [
        set(np.concatenate([c for c, b in zip(flat, body, strict=True) if b == k])) for k in (0, 1)
    ]
    assert not used[0] & used[1]


def test_truncated_octahedra_fill_space():
    shape = truncated_octahedra((2, 3, 2))
    uses: Counter = Counter()
    for cell in shape.cells["polyhedron"]:
        volume = 0.0
        assert sorted(map(len, cell)) == [4] * 6 + [6] * 8
        for face in cell:
            uses[tuple(sorted(face))] += 1
            corner = shape.points[face]
            for a, b in pairwise(corner[1:]):
                volume += np.dot(corner[0], np.cross(a, b)) / 6
        assert volume == pytest.approx(32.0)  # half of 4^3: the Voronoi cell of a bcc point
    assert set(uses.values()) == {1, 2}
    # squares join lattice neighbours of one kind; hexagons join the two kinds
    squares = 2 * (1 * 3 * 2 + 2 * 2 * 2 + 2 * 3 * 1)
    hexagons = 3 * 5 * 3  # corner (i,j,k) meets center (i or i-1, ...): (2n-1) pairs an axis
    assert sum(n == 2 for n in uses.values()) == squares + hexagons


@pytest.mark.parametrize("n_levels", [0, 1, 2, 3])
def test_refined_box_closes_every_cell(n_levels):
    box = refined_box(8, n_levels=n_levels)
    assert box.n_cells == 512 + n_levels * 448
    assert box.cell_measure.sum() == 512.0
    inner = box.face_cell[:, 1] >= 0
    assert box.face_measure[~inner].sum() == 6 * 64.0
    first, second = box.face_cell[inner].T
    area = np.bincount(box.face_cell[:, 0], box.face_measure, box.n_cells)
    area += np.bincount(second, box.face_measure[inner], box.n_cells)
    np.testing.assert_allclose(area, 6 * box.cell_measure ** (2 / 3), rtol=1e-12)
    assert np.abs(box.cell_level[first] - box.cell_level[second]).max() == min(n_levels, 1)


def test_refined_box_faces_join_cells_that_touch():
    box = refined_box(4, n_levels=2)
    first, second = box.face_cell[box.face_cell[:, 1] >= 0].T
    reach = (box.cell_measure[first] ** (1 / 3) + box.cell_measure[second] ** (1 / 3)) / 2
    apart = np.abs(box.cell_center[first] - box.cell_center[second])
    assert ((apart - reach[:, None] == 0).sum(axis=1) == 1).all()


def test_shuffling_keeps_every_cell_and_its_fields():
    flat = channel_section(12, 4)
    mixed = flat.with_shuffled_cells(5)
    assert np.sort(polygon_areas(mixed)).tolist() == np.sort(polygon_areas(flat)).tolist()
    assert mixed.cells["triangle"].tolist() != flat.cells["triangle"].tolist()
    wake = np.flatnonzero(mixed.cell_fields["region"] == 2) - len(mixed.cells["quad"])
    assert mixed.points[mixed.cells["triangle"][wake], 0].mean(axis=1).min() > 24.0


def test_shuffled_faces_join_the_same_cells():
    box = refined_box(4, n_levels=1)
    shuffled = box.with_shuffled_cells(1)

    def pairs(shape):
        ends = [
            sorted(tuple(shape.cell_center[c]) if c >= 0 else () for c in pair)
            for pair in shape.face_cell
        ]
        return sorted(ends)

    assert pairs(box) == pairs(shuffled)
    assert shuffled.cell_measure.sum() == 64.0


@pytest.mark.parametrize(
    "make",
    [
        lambda: lattice((0, 2)),
        lambda: lattice((2,)),
        lambda: jittered_tets((2, 2)),
        lambda: jittered_tets((2, 2, 2), jitter=0.2),
        lambda: channel_section(9, 4),
        lambda: channel_with_rotor(6),
        lambda: refined_box(6),
    ],
)
def test_impossible_shapes_are_refused(make):
    with pytest.raises(InputError, match=r"wanted|need"):
        make()


@pytest.mark.parametrize(
    ("make", "size"),
    [
        (lambda: channel_section(40, 8), 324.344824898114),
        (lambda: channel_mixed((16, 6)), 4080.0),
        (lambda: pier_shell(36, 12, fin=4), 85.254803570333),
        (lambda: channel_with_rotor(8), 966.144),
        (lambda: truncated_octahedra((4, 3, 3)), 2304.0),
        (lambda: refined_box(8), 512.0),
    ],
)
def test_meshes_have_the_known_size_and_no_inverted_cell(make, size):
    mesh = make().to_mesh()
    assert mesh.measures.sum() == pytest.approx(size, rel=1e-12)
    assert mesh.measures.min() > 0
    if mesh.points is not None:
        signed = mesh.signed_measures
        assert signed.min() > 0
