"""Colours: touching parts differ, from a set that stays apart for colour-blind readers."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.graph import cell_graph
from sfcpart.mesh.shapes import lattice
from sfcpart.report.colours import PALETTE, part_colours
from sfcpart.report.contact import touching_parts


def _neighbours(n: int, edges: set[tuple[int, int]]) -> list[np.ndarray]:
    rows: list[set[int]] = [set() for _ in range(n)]
    for a, b in edges:
        rows[a].add(b)
        rows[b].add(a)
    return [np.array(sorted(row), np.int64) for row in rows]


@given(st.integers(1, 24), st.data())
def test_neighbours_never_share_a_colour(n, data):
    pairs = st.tuples(st.integers(0, n - 1), st.integers(0, n - 1)).filter(lambda p: p[0] != p[1])
    edges = data.draw(st.sets(pairs, max_size=60)) if n > 1 else set()
    colours = part_colours(_neighbours(n, edges))
    for a, b in edges:
        assert not np.allclose(colours[a], colours[b])


def test_twenty_parts_that_all_touch_get_twenty_colours():
    everyone = {(a, b) for a in range(20) for b in range(a)}
    colours = part_colours(_neighbours(20, everyone))
    assert len(np.unique(colours.round(3), axis=0)) == 20
    assert colours.min() >= 0
    assert colours.max() <= 1


def test_few_parts_use_the_published_set_evenly():
    colours = part_colours(_neighbours(7, {(0, 1), (1, 2)}))
    assert len(np.unique(colours, axis=0)) == 7
    # Okabe and Ito (2008), as RGB 0-255, from memory.
    published = {(230, 159, 0), (86, 180, 233), (0, 158, 115), (240, 228, 66)}
    published |= {(0, 114, 178), (213, 94, 0), (204, 121, 167)}
    assert {tuple(row) for row in np.rint(colours * 255).astype(int).tolist()} == published
    assert len(PALETTE) == 7


def test_touching_parts_of_a_lattice_in_columns():
    mesh = lattice((6, 2)).to_mesh()
    part = np.tile([0, 0, 1, 1, 2, 2], 2)
    touching = touching_parts(part, cell_graph(mesh), n_parts=4)
    assert [row.tolist() for row in touching] == [[1], [0, 2], [1], []]


@pytest.mark.parametrize("n_parts", [1, 3])
def test_parts_without_neighbours_are_coloured_too(n_parts):
    assert part_colours([np.array([], np.int64)] * n_parts).shape == (n_parts, 3)
