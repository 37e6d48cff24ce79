"""Assessments of whole meshes with their own cell graph: degenerate ones, real ones, any small."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.graph import cell_graph
from sfcpart.measure import assess_partition
from sfcpart.measure.bounds import least_cut_measure
from sfcpart.measure.lattice import find_lattice
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.shapes import jittered_tets, lattice
from sfcpart.partition import Partition
from sfcpart.slices.graph_slice import GraphSlice
from tests.oracles.figures import figures_by_sets
from tests.strategies import small_meshes


def graph_or_none(mesh):
    return None if mesh.points is None and mesh.faces is None else cell_graph(mesh)


def test_degenerate_meshes_agree_with_sets_and_give_strict_json(degenerate):
    mesh, n_parts = degenerate.mesh, degenerate.n_parts
    graph = graph_or_none(mesh)
    cell_part = np.arange(mesh.n_cells) * n_parts // mesh.n_cells
    partition = Partition.from_array(cell_part, n_parts)
    found = assess_partition(mesh, graph, partition, weights=degenerate.weights)
    json.dumps(found.to_json_dict(), allow_nan=False)
    assert found.part["cells"].sum() == mesh.n_cells
    if graph is not None:
        for name, column in figures_by_sets(graph, cell_part.tolist(), n_parts).items():
            assert found.part[name].tolist() == pytest.approx(column, rel=1e-12), name


@given(small_meshes(), st.integers(1, 5), st.integers(0, 2**32 - 1))
def test_continuous_bound_never_exceeds_the_cut_of_a_valid_mesh(mesh, n_parts, seed):
    cell_part = np.random.default_rng(seed).integers(0, n_parts, mesh.n_cells)
    graph = cell_graph(mesh)
    found = assess_partition(mesh, graph, Partition.from_array(cell_part, n_parts))
    boundary = float(graph.boundary_measure.sum())
    bound = least_cut_measure(found.part["measure"], dim=mesh.dim, boundary_measure=boundary)
    assert bound <= found.total["cut_measure"] * (1 + 1e-12)
    assert (found.total["least_cut_measure"] or 0) >= bound * (bound > 0)
    ratio = found.part["surface_ratio"]
    assert (ratio[np.isfinite(ratio)] >= 1 - 1e-9).all()


@given(small_meshes(), st.integers(1, 4), st.sampled_from([-3, 5]))
def test_scaling_by_a_power_of_two_scales_measures_only(mesh, n_parts, power):
    cell_part = np.arange(mesh.n_cells) % n_parts
    partition = Partition.from_array(cell_part, n_parts)
    name = {5: "triangle", 9: "quad", 10: "tetra", 12: "hexahedron"}[int(mesh.kind[0])]
    cells = mesh.indices.reshape(mesh.n_cells, -1)
    larger = Mesh.from_arrays(mesh.points * 2.0**power, {name: cells})
    one = assess_partition(mesh, cell_graph(mesh), partition)
    two = assess_partition(larger, cell_graph(larger), partition)
    face, cell = 2.0 ** (power * (mesh.dim - 1)), 2.0 ** (power * mesh.dim)
    times = {"cut_measure": face, "least_cut_measure": face, "measure": cell}
    for key, value in one.total.items():
        if value is None:
            assert two.total[key] is None
        else:
            assert two.total[key] == pytest.approx(value * times.get(key, 1), rel=1e-12), key


@pytest.mark.parametrize(
    ("counts", "size"), [((6, 4), None), ((3, 4, 5), None), ((6, 4), (1.5, 1.0)), ((1, 5, 5), None)]
)
def test_lattices_are_recognised_whatever_the_order_of_cells(counts, size):
    shape = lattice(counts, size=size)
    ((name, cells),) = shape.cells.items()
    order = np.random.default_rng(0).permutation(len(cells))
    mesh = Mesh.from_arrays(shape.points, {name: cells[order]})
    found = find_lattice(mesh.centers, mesh.measures, GraphSlice.whole(cell_graph(mesh)))
    long = tuple(n for n in counts if n > 1)
    assert found is not None
    assert (found.dim, found.sides) == (len(long), long)
    assert found.face_measure == pytest.approx(cell_graph(mesh).data[0])


def test_a_lattice_with_a_hole_has_no_full_box():
    shape = lattice((5, 5))
    cells = np.delete(shape.cells["quad"], 12, axis=0)
    mesh = Mesh.from_arrays(shape.points, {"quad": cells})
    found = find_lattice(mesh.centers, mesh.measures, GraphSlice.whole(cell_graph(mesh)))
    assert (found.dim, found.sides, found.boundary_faces) == (2, None, 24)


@pytest.mark.parametrize(
    "spoil",
    [
        lambda points: points * [1.0, 1.001],  # no squares
        lambda points: points + [[0.01, 0.0]] * (np.arange(len(points)) == 17)[:, None],
        lambda points: points @ [[1.0, 0.0], [0.3, 1.0]],  # sheared: equal areas
    ],
)
def test_what_is_nearly_a_lattice_is_none(spoil):
    shape = lattice((5, 5))
    mesh = Mesh.from_arrays(spoil(shape.points), {"quad": shape.cells["quad"]})
    assert find_lattice(mesh.centers, mesh.measures, GraphSlice.whole(cell_graph(mesh))) is None


def test_two_sheets_on_the_same_sites_are_no_lattice():
    shape = lattice((3, 3))
    twice = np.concatenate([shape.points, shape.points])
    cells = np.concatenate([shape.cells["quad"], shape.cells["quad"] + len(shape.points)])
    mesh = Mesh.from_arrays(twice, {"quad": cells})
    assert find_lattice(mesh.centers, mesh.measures, GraphSlice.whole(cell_graph(mesh))) is None


def test_a_bound_above_the_cut_at_hand_is_dropped():
    # Two coincident sheets, one part each: nothing is cut, but two squares of area 9 side by side
    # with a boundary of 24 would leave a bound of 0; four parts on one spot show it.
    shape = lattice((3, 3))
    n = len(shape.points)
    points = np.concatenate([shape.points] * 2)
    quads = np.concatenate([shape.cells["quad"], shape.cells["quad"] + n])
    mesh = Mesh.from_arrays(points, {"quad": quads})
    found = assess_partition(mesh, cell_graph(mesh), Partition.from_array([0] * 9 + [1] * 9))
    assert found.total["cut_measure"] == 0
    assert found.total["least_cut_measure"] is None


def test_jittered_tets_conserve_volume_and_surface():
    mesh = jittered_tets((6, 5, 4)).to_mesh()
    cell_part = (mesh.centers[:, 0] > 3).astype(int) + 2 * (mesh.centers[:, 1] > 2.5)
    found = assess_partition(mesh, cell_graph(mesh), Partition.from_array(cell_part))
    assert found.total["measure"] == pytest.approx(120)
    # the boundary of the box stays flat: 2 (30 + 24 + 20)
    assert found.part["boundary_measure"].sum() == pytest.approx(148)
    assert found.part["surface"].sum() == pytest.approx(148 + 2 * found.total["cut_measure"])
    assert found.total["least_cut_faces"] is None
    assert 1 < found.total["surface_ratio_mean"] < 3


def test_two_squares_that_meet_at_both_ends_are_no_lattice():
    # A ring of two: each has its upper and lower side on the boundary, the others joined twice.
    faces = [[0, 1], [1, 0], [0, -1], [0, -1], [1, -1], [1, -1]]
    mesh = Mesh.from_faces(faces, np.ones(6), [[0.0, 0.0], [1.0, 0.0]], np.ones(2))
    assert find_lattice(mesh.centers, mesh.measures, GraphSlice.whole(cell_graph(mesh))) is None
