"""What must hold for the figures of any partition of any graph."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from sfcpart.halo import build_halo
from sfcpart.measure import PART_COLUMNS, assess_partition
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from tests.oracles.figures import figures_by_sets
from tests.oracles.lattices import graph_of_edges

TOTAL_OF_SUMS = {
    "n_cells": ("cells", 1),
    "weight": ("weight", 1),
    "measure": ("measure", 1),
    "cut_faces": ("cut_faces", 2),
    "cut_measure": ("cut_measure", 2),
    "halo_cells": ("halo_cells", 1),
    "stray_cells": ("stray_cells", 1),
}


@st.composite
def split_graphs(draw):
    """Draw faces between cells (some pairs share several), centres, parts (some empty), weights.

    Measures and weights are whole, so that sums are exact in any order.
    """
    n = draw(st.integers(1, 25))
    cell = st.integers(0, n - 1)
    measure = st.integers(0, 9).map(float)
    faces = draw(st.lists(st.tuples(cell, cell, measure), max_size=60))
    faces = [(a, b, m) for a, b, m in faces if a != b]
    boundary = draw(st.lists(st.tuples(cell, measure), max_size=20))
    centers = draw(hnp.arrays(np.int64, (n, 2), elements=st.integers(-5, 5))).astype(float)
    measures = draw(hnp.arrays(np.int64, n, elements=st.integers(0, 5))).astype(float)
    n_parts = draw(st.integers(1, 6))
    cell_part = draw(hnp.arrays(np.int32, n, elements=st.integers(0, n_parts - 1)))
    weights = draw(hnp.arrays(np.int64, n, elements=st.integers(0, 9)))
    return faces, boundary, centers, measures, cell_part, n_parts, weights


def assess_graph(faces, boundary, centers, measures, cell_part, n_parts, weights):
    mesh = Mesh.from_centers(centers, measures=measures)
    graph = graph_of_edges(len(centers), faces, boundary)
    partition = Partition.from_array(cell_part, n_parts)
    return graph, assess_partition(mesh, graph, partition, weights=weights)


@given(split_graphs())
def test_columns_agree_with_sets_and_add_up_to_the_totals(drawn):
    graph, found = assess_graph(*drawn)
    cell_part, n_parts = drawn[4], drawn[5]
    for name, column in figures_by_sets(graph, cell_part.tolist(), n_parts).items():
        assert found.part[name].tolist() == column, name
    for name, (column, times) in TOTAL_OF_SUMS.items():
        assert found.part[column].sum() == times * found.total[name], name
    assert found.part["sent_cells"].sum() == found.total["halo_cells"]
    surface = found.part["cut_measure"] + found.part["boundary_measure"]
    assert found.part["surface"].tolist() == surface.tolist()


@given(split_graphs())
def test_pairs_are_symmetric_and_add_up_to_the_columns(drawn):
    _, found = assess_graph(*drawn)
    pairs = found.pairs
    sent = {}
    for k in range(len(pairs.part)):
        sent[int(pairs.part[k]), int(pairs.neighbour[k])] = (pairs.faces[k], pairs.sent_cells[k])
    assert list(sent) == sorted(sent) and len(sent) == len(pairs.part)
    for k, (p, q) in enumerate(sent):
        assert sent[q, p] == (pairs.faces[k], pairs.received_cells[k])
    for name, values in [("cut_faces", pairs.faces), ("sent_cells", pairs.sent_cells)]:
        by_part = np.bincount(pairs.part, weights=values, minlength=found.n_parts)
        assert by_part.tolist() == found.part[name].tolist()


@given(split_graphs(), st.randoms(use_true_random=False))
def test_renaming_parts_permutes_rows_and_keeps_totals(drawn, random):
    faces, boundary, centers, measures, cell_part, n_parts, weights = drawn
    name = np.array(random.sample(range(n_parts), n_parts), np.int32)
    _, one = assess_graph(*drawn)
    _, two = assess_graph(faces, boundary, centers, measures, name[cell_part], n_parts, weights)
    _assert_same(one, two, order=name)


@given(split_graphs(), st.randoms(use_true_random=False))
def test_renumbering_cells_changes_nothing(drawn, random):
    faces, boundary, centers, measures, cell_part, n_parts, weights = drawn
    n = len(centers)
    number = np.array(random.sample(range(n), n))
    old = np.argsort(number)
    moved = [(int(number[a]), int(number[b]), m) for a, b, m in faces]
    edge = [(int(number[a]), m) for a, m in boundary]
    _, one = assess_graph(*drawn)
    _, two = assess_graph(
        moved, edge, centers[old], measures[old], cell_part[old], n_parts, weights[old]
    )
    _assert_same(one, two, order=np.arange(n_parts))


def _assert_same(one, two, *, order):
    """Row p of one is row order[p] of two; totals agree up to rounding of means."""
    for column in PART_COLUMNS:
        values, moved = one.part[column.name], two.part[column.name]
        if values is None or column.name == "part":
            continue
        if column.name == "step_seconds":  # messages are added in the order of neighbours
            np.testing.assert_allclose(moved[order], values, rtol=1e-12)
        else:
            np.testing.assert_array_equal(moved[order], values, err_msg=column.name)
    for name, value in one.total.items():
        other = two.total[name]
        assert (value is None) == (other is None), name
        if value is not None:
            np.testing.assert_allclose(other, value, rtol=1e-12, err_msg=name)


@given(split_graphs())
def test_halo_counts_are_those_of_the_exchange_lists(drawn):
    graph, found = assess_graph(*drawn)
    cell_part, n_parts = drawn[4], drawn[5]
    halo = build_halo(
        None, graph, Partition.from_array(cell_part, n_parts), order=np.arange(graph.n_cells)
    )
    pairs = found.pairs
    assert np.diff(halo.halo_indptr).tolist() == found.part["halo_cells"].tolist()
    assert halo.neighbour.tolist() == pairs.neighbour.tolist()
    assert np.diff(halo.neighbour_indptr).tolist() == found.part["neighbours"].tolist()
    assert np.diff(halo.receive_indptr).tolist() == pairs.received_cells.tolist()
    assert np.diff(halo.send_indptr).tolist() == pairs.sent_cells.tolist()
