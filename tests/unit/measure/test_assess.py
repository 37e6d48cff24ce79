"""Figures of small partitions worked out by hand, and against a twin by sets."""

from __future__ import annotations

import json
from math import pi, sqrt

import numpy as np
import pytest
from scipy.sparse import csr_array
from scipy.sparse.csgraph import connected_components

from sfcpart.measure import PART_COLUMNS, TOTAL_COLUMNS, StepModel, assess_partition
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from tests.oracles.figures import figures_by_sets
from tests.oracles.lattices import box, graph_of_edges, lattice_graph, lattice_mesh


def assess_lattice(sites, cell_part, *, n_parts=None, spacing=1.0, **options):
    mesh = lattice_mesh(sites, spacing=spacing)
    graph = lattice_graph(sites, spacing=spacing)
    return assess_partition(mesh, graph, Partition.from_array(cell_part, n_parts), **options)


def test_three_columns_of_a_strip():
    # 4 x 2 squares of side 2, columns 0 | 1 2 | 3: every figure by hand.
    found = assess_lattice(box(4, 2), [0, 1, 1, 2, 0, 1, 1, 2], spacing=2.0)
    part = {name: None if v is None else v.tolist() for name, v in found.part.items()}
    assert part["part"] == [0, 1, 2]
    assert part["cells"] == [2, 4, 2]
    assert part["weight"] == [2, 4, 2]
    assert part["load"] == part["load_unweighted"] == [0.75, 1.5, 0.75]
    assert part["cut_faces"] == [2, 4, 2]
    assert part["cut_measure"] == [4, 8, 4]
    assert part["boundary_faces"] == [4, 4, 4]
    assert part["boundary_measure"] == [8, 8, 8]
    assert part["halo_cells"] == [2, 4, 2]
    assert part["sent_cells"] == [2, 4, 2]
    assert part["neighbours"] == [1, 2, 1]
    assert part["smallest_interface"] == [2, 2, 2]
    assert part["pieces"] == [1, 1, 1]
    assert part["stray_cells"] == [0, 0, 0]
    assert part["measure"] == [8, 16, 8]
    assert part["surface"] == [12, 16, 12]
    assert part["surface_to_measure"] == [1.5, 1, 1.5]
    assert part["faces_to_cells"] == [3, 2, 3]
    assert part["stretch"] == pytest.approx([2, 1, 2])
    assert part["surface_ratio"] == pytest.approx(
        [12 / (2 * sqrt(8 * pi)), 16 / (2 * sqrt(16 * pi)), 12 / (2 * sqrt(8 * pi))]
    )
    assert part["limit_weight"] is part["limit_share"] is None
    total = found.total
    assert (total["n_parts"], total["n_cells"], total["n_faces"]) == (3, 8, 10)
    assert (total["cut_faces"], total["cut_measure"], total["halo_cells"]) == (4, 8, 8)
    assert total["cut_share"] == 0.4
    assert total["imbalance"] == total["imbalance_unweighted"] == 0.5
    assert total["least_imbalance"] == pytest.approx(3 / (8 / 3) - 1)
    assert (total["neighbours_max"], total["smallest_interface"]) == (2, 2)
    assert total["neighbours_mean"] == pytest.approx(4 / 3)
    assert (total["least_cut_faces"], total["cut_faces_ratio"]) == (4, 1)
    assert (total["least_cut_measure"], total["cut_measure_ratio"]) == pytest.approx((8, 1))


def test_two_halves_of_a_cube():
    found = assess_lattice(box(4, 4, 4), [0] * 32 + [1] * 32)
    assert found.total["cut_faces"] == found.total["least_cut_faces"] == 16
    assert found.part["stretch"].tolist() == pytest.approx([2, 2])
    assert found.part["surface"].tolist() == [64, 64]
    assert found.part["surface_ratio"][0] == pytest.approx(64 / (36 * pi * 32**2) ** (1 / 3))


def test_one_cube_has_the_known_ratio():
    found = assess_lattice(box(1, 1, 1), [0])
    assert found.part["surface_ratio"][0] == pytest.approx((6 / pi) ** (1 / 3))
    assert found.total["cut_faces"] == found.total["least_cut_faces"] == 0
    assert found.total["cut_faces_ratio"] is None
    assert found.total["smallest_interface"] == 0


def test_pieces_empty_parts_and_stray_cells_are_named():
    # a row of 7: part 0 in three pieces, the largest of 2 cells; parts 2 and 4 have none
    found = assess_lattice(box(7, 1), [0, 1, 0, 0, 3, 1, 0], n_parts=5)
    assert found.part["pieces"].tolist() == [3, 2, 0, 1, 0]
    assert found.part["stray_cells"].tolist() == [2, 1, 0, 0, 0]
    assert found.empty_parts.tolist() == [2, 4]
    assert found.split_parts.tolist() == [0, 1]
    assert (found.total["n_empty_parts"], found.total["n_split_parts"]) == (2, 2)
    assert (found.total["pieces_max"], found.total["stray_cells"]) == (3, 3)
    assert np.isnan(found.part["stretch"][[2, 4]]).all()
    assert found.total["neighbours_mean"] == pytest.approx((2 + 2 + 2) / 3)


def test_a_cell_is_sent_once_to_each_part_that_touches_it():
    # The corner cell of a 2 x 2 block touches part 1 twice through two cells.
    found = assess_lattice(box(2, 2), [0, 1, 1, 1])
    assert found.part["halo_cells"].tolist() == [2, 1]
    assert found.part["sent_cells"].tolist() == [1, 2]
    assert found.pairs.faces.tolist() == [2, 2]
    assert found.pairs.sent_cells.tolist() == [1, 2]
    assert found.pairs.received_cells.tolist() == [2, 1]


def test_weights_and_speeds_stand_beside_plain_counts():
    found = assess_lattice(
        box(4, 1),
        [0, 0, 1, 1],
        weights=[1, 1, 4, 2],
        speeds=[1, 3],
        limit_weights=[1, 2, 3, 4],
        limits=[6, 7],
    )
    # speeds scale to 1/2 and 3/2, so fair shares are 2 and 6 of 8
    assert found.part["speed"].tolist() == [0.5, 1.5]
    assert found.part["load"].tolist() == [1, 1]
    assert found.part["load_unweighted"].tolist() == [2, pytest.approx(2 / 3)]
    assert found.total["imbalance"] == 0
    assert found.total["imbalance_unweighted"] == 1
    assert found.total["least_imbalance_unweighted"] == 0  # 1 and 3 cells
    assert found.part["limit_weight"].tolist() == [3, 7]
    assert found.part["limit_share"].tolist() == [0.5, 1]
    assert found.total["limit_share"] == 1


def test_weights_of_nothing_have_no_imbalance():
    found = assess_lattice(box(4, 1), [0, 0, 1, 1], weights=np.zeros(4))
    assert found.total["imbalance"] is None
    assert found.total["imbalance_unweighted"] == 0
    assert found.total["speed_up"] is not None
    json.dumps(found.to_json_dict(), allow_nan=False)


def test_whole_weights_are_summed_exactly():
    weights = np.full(64, 2**46 + 1)
    found = assess_lattice(box(8, 8), [0] * 63 + [1], weights=weights)
    assert found.part["weight"].tolist() == [63 * (2**46 + 1), 2**46 + 1]


def test_centres_alone_leave_out_what_needs_faces():
    centers = np.array([[0.0, 0.0], [1.0, 0.0], [2.0, 0.0], [3.0, 1.0]])
    found = assess_partition(Mesh.from_centers(centers), None, Partition.from_array([0, 0, 1, 1]))
    for column in PART_COLUMNS:
        known = not column.needs_faces and column.name not in {
            "measure",
            "limit_weight",
            "limit_share",
        }
        assert (found.part[column.name] is not None) == known, column.name
    for column in TOTAL_COLUMNS:
        assert not column.needs_faces or found.total[column.name] is None, column.name
    assert found.total["imbalance"] == 0
    assert np.isnan(found.part["stretch"][0])  # a side of 0 and no cell size
    assert found.part["stretch"][1] == 1
    assert found.pairs is None and found.split_parts.size == 0
    json.dumps(found.to_json_dict(), allow_nan=False)


def test_centres_with_measures_have_a_stretch():
    centers = np.array([[0.0, 0.0], [1.0, 0.0], [2.0, 0.0]])
    mesh = Mesh.from_centers(centers, measures=np.ones(3))
    found = assess_partition(mesh, None, Partition.from_array([0, 0, 0]))
    assert found.part["stretch"].tolist() == [3]
    assert found.part["measure"].tolist() == [3]


def test_a_curved_surface_has_no_ratio_and_no_bound():
    # two squares that meet at a right angle
    points = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [1, 0, 1], [1, 1, 1]]
    mesh = Mesh.from_arrays(points, {"quad": [[0, 1, 2, 3], [1, 4, 5, 2]]})
    graph = graph_of_edges(2, [(0, 1, 1.0)], [(0, 3.0), (1, 3.0)])
    found = assess_partition(mesh, graph, Partition.from_array([0, 1]))
    assert found.part["surface_ratio"] is None
    assert found.total["least_cut_faces"] is found.total["least_cut_measure"] is None
    assert found.part["stretch"].tolist() == pytest.approx([1, 1])


@pytest.mark.parametrize("axis", [0, 1, 2])
def test_a_plane_in_space_counts_as_planar(axis):
    flat = lattice_mesh(box(4, 4))
    points = np.insert(flat.points, axis, 2.5, axis=1)
    mesh = Mesh.from_arrays(points, {"quad": flat.indices.reshape(-1, 4)})
    graph = lattice_graph(box(4, 4))
    found = assess_partition(mesh, graph, Partition.from_array([0] * 8 + [1] * 8))
    assert found.total["least_cut_faces"] == 4
    assert found.total["surface_ratio_max"] == pytest.approx(12 / (2 * sqrt(8 * pi)))


def test_faces_that_join_opposite_ends_get_no_bound():
    # A ring of 4 squares cut twice: the bound of the open strip would be 1, that of area more.
    sites = box(4, 1)
    centers = np.array(sites, float)
    edges = [(0, 1, 1.0), (1, 2, 1.0), (2, 3, 1.0), (3, 0, 1.0)]
    graph = graph_of_edges(4, edges, [(k, 1.0) for k in range(4) for _ in range(2)])
    mesh = Mesh.from_faces(
        [[a, b] for a, b, _ in edges] + [[k, -1] for k in range(4) for _ in range(2)],
        np.ones(12),
        centers,
        np.ones(4),
    )
    found = assess_partition(mesh, graph, Partition.from_array([0, 0, 1, 1]))
    assert found.total["cut_faces"] == 2
    assert found.total["least_cut_faces"] is found.total["least_cut_measure"] is None


def test_keys_are_those_of_the_table_and_json_is_strict():
    found = assess_lattice(box(3, 3), [0, 0, 0, 1, 1, 1, 3, 3, 3], n_parts=4)
    assert list(found.part) == [column.name for column in PART_COLUMNS]
    assert list(found.total) == [column.name for column in TOTAL_COLUMNS]
    plain = json.loads(json.dumps(found.to_json_dict(), allow_nan=False))
    assert plain["empty_parts"] == [2]
    assert plain["part"]["stretch"][2] is None
    rows = list(found.rows())
    assert len(rows) == 4
    assert rows[1]["cells"] == 3 and isinstance(rows[1]["cells"], int)
    for name, column in plain["part"].items():
        assert [row[name] for row in rows] == column


def test_whole_columns_hold_whole_numbers():
    found = assess_lattice(box(3, 3), [0, 0, 0, 1, 1, 1, 2, 2, 2])
    for column in PART_COLUMNS:
        values = found.part[column.name]
        if values is not None:
            assert (values.dtype.kind == "i") == column.is_whole, column.name
            assert not values.flags.writeable
    for column in TOTAL_COLUMNS:
        value = found.total[column.name]
        if value is not None:
            assert isinstance(value, int) == column.is_whole, column.name


@pytest.mark.parametrize("sides", [(6, 5), (3, 4, 3)])
@pytest.mark.parametrize("n_parts", [1, 2, 5, 30])
def test_agrees_with_the_twin_by_sets(sides, n_parts):
    random = np.random.default_rng(n_parts)
    sites = [site for site in box(*sides) if random.random() < 0.9]
    cell_part = random.integers(0, n_parts, len(sites))
    found = assess_lattice(sites, cell_part, n_parts=n_parts)
    twin = figures_by_sets(lattice_graph(sites), cell_part.tolist(), n_parts)
    for name, column in twin.items():
        assert found.part[name].tolist() == pytest.approx(column, rel=1e-12), name


def test_pieces_are_scipys_components():
    random = np.random.default_rng(3)
    sites = box(20, 20)
    graph = lattice_graph(sites)
    cell_part = random.integers(0, 3, len(sites))
    found = assess_lattice(sites, cell_part)
    matrix = csr_array((graph.data, graph.indices, graph.indptr), shape=(400, 400)).toarray()
    for p in range(3):
        own = np.flatnonzero(cell_part == p)
        count, label = connected_components(csr_array(matrix[np.ix_(own, own)]), directed=False)
        assert found.part["pieces"][p] == count
        assert found.part["stray_cells"][p] == len(own) - np.bincount(label).max()


def test_threads_change_no_bit(monkeypatch):
    # 48 x 1100 squares: 3 ranges on 3 threads; parts scattered, so pieces cross the ranges.
    n = 48 * 1100
    mesh = Mesh.from_centers(np.random.default_rng(0).random((n, 2)))
    graph = _strip_graph(1100, 48)
    cell_part = np.random.default_rng(1).integers(0, 7, n)
    weights = np.random.default_rng(2).random(n)
    results = []
    for threads in ("1", "3"):
        monkeypatch.setenv("SFCPART_THREADS", threads)
        found = assess_partition(mesh, graph, Partition.from_array(cell_part), weights=weights)
        results.append(found)
    for column in PART_COLUMNS:
        one, three = (found.part[column.name] for found in results)
        assert (one is None and three is None) or one.tobytes() == three.tobytes(), column.name
    assert results[0].total == results[1].total


def _strip_graph(nx, ny):
    from sfcpart.graph import CellGraph

    cell = np.arange(nx * ny)
    right, up = cell[cell % nx < nx - 1], cell[cell < nx * (ny - 1)]
    pairs = np.concatenate([np.c_[right, right + 1], np.c_[up, up + nx]])
    both = np.concatenate([pairs, pairs[:, ::-1]])
    both = both[np.lexsort((both[:, 1], both[:, 0]))]
    degree = np.bincount(both[:, 0], minlength=len(cell))
    low, high = both.min(axis=1), both.max(axis=1)
    return CellGraph(
        indptr=np.concatenate([[0], np.cumsum(degree)]).astype(np.int64),
        indices=both[:, 1].astype(np.int32),
        data=1.0 + np.sin(low * 7.0 + high),
        boundary_count=(4 - degree).astype(np.int32),
        boundary_measure=(4 - degree) * 0.1,
    )


def test_wide_indices_give_the_same():
    from dataclasses import replace

    sites = box(5, 5)
    mesh, graph = lattice_mesh(sites), lattice_graph(sites)
    partition = Partition.from_array(np.arange(25) % 4)
    narrow = assess_partition(mesh, graph, partition)
    wide = assess_partition(mesh, replace(graph, indices=graph.indices.astype(np.int64)), partition)
    assert narrow.total == wide.total


def test_two_faces_between_the_same_cells_count_twice_but_send_once():
    mesh = Mesh.from_centers([[0.0, 0.0], [1.0, 0.0]], measures=[1.0, 1.0])
    graph = graph_of_edges(2, [(0, 1, 0.25), (0, 1, 0.75)])
    found = assess_partition(mesh, graph, Partition.from_array([0, 1]))
    assert found.total["cut_faces"] == 2
    assert found.total["cut_measure"] == 1
    assert found.total["halo_cells"] == 2
    assert found.part["smallest_interface"].tolist() == [2, 2]


def test_the_model_is_kept_beside_the_figures():
    model = StepModel(cell_seconds=2e-6)
    found = assess_lattice(box(4, 1), [0, 0, 1, 1], step_model=model)
    assert found.step_model is model
    assert found.to_json_dict()["step_model"]["cell_seconds"] == 2e-6
    assert found.total["step_seconds"] == found.part["step_seconds"].max()
