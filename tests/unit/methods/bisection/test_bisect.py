"""Recursive bisection: shares, speeds, levels, groups, limits, ties, ranks."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import InputError, PartitionError
from sfcpart.graph import CellGraph, cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS
from sfcpart.partition import Partition
from tests.assertions import assert_partition, part_weights
from tests.strategies import DEGENERATE, clouds, dyadic_clouds, grid, group_numbers, part_counts

BY_PLACE = ["coordinate", "inertial"]
ALL = [*BY_PLACE, "spectral"]


def split(centers, n_parts, method="coordinate", *, graph=None, **options) -> np.ndarray:
    speed = options.pop("part_speed", np.ones(n_parts))
    problem = Problem(centers, n_parts, speed, SerialComm(), lambda: graph, **options)
    return METHODS[method].run(problem)


def random_graph(n: int, seed: int, density: float) -> CellGraph:
    """Join random pairs of cells; some cells may stay alone."""
    from scipy.sparse import csr_array

    rng = np.random.default_rng(seed)
    pairs = np.triu(rng.random((n, n)) < density, 1)
    matrix = csr_array((pairs | pairs.T).astype(float))
    boundary = np.zeros(n, np.int32)
    indptr, indices = matrix.indptr.astype(np.int64), matrix.indices
    return CellGraph(indptr, indices, matrix.data, boundary, boundary * 1.0)


@given(st.data())
def test_every_part_gets_its_share(data):
    centers = data.draw(clouds())
    n = len(centers)
    n_parts = data.draw(part_counts(n))
    graph = random_graph(n, data.draw(st.integers(0, 99)), data.draw(st.sampled_from([0, 0.1, 1])))
    for method in ALL:
        part = split(centers, n_parts, method, graph=graph)
        share = -(-n // n_parts)  # cells are alike: no part needs more than the share rounded up
        assert_partition(Partition.from_array(part, n_parts), n, n_parts, bottleneck=share)


@given(st.data())
def test_weights_speeds_and_groups(data):
    centers = data.draw(dyadic_clouds(min_size=2))
    n = len(centers)
    group = data.draw(group_numbers(n))
    free = int((group < 0).sum())
    n_items = free + len(np.unique(group[group >= 0]))
    n_parts = data.draw(part_counts(n_items))
    weight = np.array(data.draw(st.lists(st.integers(0, 9), min_size=n, max_size=n)))
    speed = np.array(data.draw(st.lists(st.integers(1, 4), min_size=n_parts, max_size=n_parts)))
    graph = random_graph(n, data.draw(st.integers(0, 99)), 0.2)
    for method in ALL:
        options = {"weight": weight, "group": group, "part_speed": speed * 1.0, "graph": graph}
        part = split(centers, n_parts, method, **options)
        assert_partition(
            Partition.from_array(part, n_parts), n, n_parts, weights=weight, groups=group
        )


@pytest.mark.parametrize("method", ALL)
def test_two_parts_are_as_good_as_the_line_allows(method):
    # the best of all cuts of the line along x, found by trying them
    rng = np.random.default_rng(5)
    x, weight = np.sort(rng.random(30)), rng.integers(0, 20, 30)
    line = Mesh.from_faces(
        np.stack([np.arange(29), np.arange(1, 30)], axis=1), np.ones(29),
        np.stack([x, 0 * x], axis=1), np.ones(30),
    )  # fmt: skip
    sums = np.concatenate(([0], np.cumsum(weight)))
    speed = np.array([1.0, 3.0])
    part = split(line.centers, 2, method, weight=weight, part_speed=speed, graph=cell_graph(line))
    best = np.maximum(sums / speed[0], (sums[-1] - sums) / speed[1])[1:-1].min()
    other = np.maximum(sums / speed[1], (sums[-1] - sums) / speed[0])[1:-1].min()
    found = (part_weights(part, 2, weight) / speed).max()
    assert found in (best, other)  # spectral lines may run either way
    assert method == "spectral" or found == best


@pytest.mark.parametrize("method", ALL)
def test_levels_are_bisected_one_after_another(method):
    mesh = grid((12, 10))
    nested = split(mesh.centers, 12, method, level_sizes=(3, 4), graph=cell_graph(mesh))
    outer = split(mesh.centers, 3, method, graph=cell_graph(mesh))
    assert (nested // 4 == outer).all()
    assert (np.bincount(nested) == 10).all()


@pytest.mark.parametrize("method", ALL)
def test_speeds_share_out_the_cells(method):
    mesh = grid((20, 20))
    speed = np.array([1.0, 2.0, 1.0, 4.0])
    part = split(mesh.centers, 4, method, part_speed=speed, graph=cell_graph(mesh))
    assert np.bincount(part).tolist() == [50, 100, 50, 200]


@pytest.mark.parametrize("method", ALL)
def test_limits_are_kept_or_refused(method):
    mesh = grid((10, 4))
    options = {"limit_weight": np.ones(40, np.int64), "graph": cell_graph(mesh)}
    part = split(mesh.centers, 3, method, part_limit=np.array([5, 30, 9]), **options)
    assert (np.bincount(part) <= [5, 30, 9]).all()
    with pytest.raises(PartitionError, match="need 40 in all, the 3 parts may hold 39"):
        split(mesh.centers, 3, method, part_limit=np.full(3, 13), **options)
    blocks = np.where(np.arange(40) < 3, 3, 0)  # three items of 3 into two parts of 5
    with pytest.raises(PartitionError, match="no cut between parts 0 to 0 .* keeps the limits"):
        split(
            mesh.centers, 2, method, part_limit=np.full(2, 5), limit_weight=blocks,
            graph=options["graph"],
        )  # fmt: skip


@pytest.mark.parametrize("method", ALL)
def test_more_parts_than_cells_leave_some_empty(method):
    mesh = grid((3, 1))
    for n_parts in (4, 7, 100):
        part = split(mesh.centers, n_parts, method, graph=cell_graph(mesh))
        assert len(np.unique(part)) == 3
    assert len(split(np.zeros((0, 3)), 4, "coordinate")) == 0
    with pytest.raises(PartitionError, match="groups leave 1 items for 2 parts"):
        split(mesh.centers, 2, method, group=np.zeros(3, np.int64), graph=cell_graph(mesh))


@pytest.mark.parametrize("method", ALL)
@pytest.mark.parametrize("name", [name for name in DEGENERATE if name != "empty"])
def test_degenerate_meshes(method, name):
    case = DEGENERATE[name]()
    n_parts = min(case.n_parts, case.mesh.n_cells)
    weight = None if case.weights is None else np.asarray(case.weights).astype(np.int64)
    if case.mesh.points is None and case.mesh.faces is None and method == "spectral":
        pytest.skip("no cell graph")
    graph = None if method != "spectral" else cell_graph(case.mesh)
    part = split(case.mesh.centers, n_parts, method, weight=weight, graph=graph)
    assert_partition(Partition.from_array(part, n_parts), case.mesh, n_parts, weights=weight)


@pytest.mark.parametrize("method", BY_PLACE)
def test_ties_go_by_cell_number(method):
    assert split(np.zeros((6, 3)), 3, method).tolist() == [0, 0, 1, 1, 2, 2]
    assert split(np.zeros((4, 2)), 2, method, weight=np.array([1, 1, 1, 3])).tolist() == [
        0,
        0,
        0,
        1,
    ]


@pytest.mark.parametrize("method", BY_PLACE)
@given(st.data())
def test_scaling_and_shifting_change_nothing(method, data):
    centers = data.draw(dyadic_clouds(min_size=4))
    n_parts = data.draw(part_counts(len(centers)))
    moved = centers * 2.0 ** data.draw(st.integers(-8, 8))
    moved += 2.0 ** data.draw(st.integers(-3, 3)) * (method == "coordinate")
    assert (split(centers, n_parts, method) == split(moved, n_parts, method)).all()


def test_the_principal_axis_of_a_turned_strip():
    # a strip of 200 x 10 turned by 30 degrees is cut across, a box of coordinates would not be
    x, y = np.meshgrid(np.arange(200.0), np.arange(10.0), indexing="ij")
    c, d = np.cos(np.pi / 6), np.sin(np.pi / 6)
    turn = np.array([[c, -d], [d, c]])
    flat = np.stack([x.ravel(), y.ravel()], axis=1)
    part = split(flat @ turn.T, 4, "inertial")
    assert (np.sort(x.ravel()[part == part[0]]) == np.repeat(np.arange(50.0), 10)).all()


@pytest.mark.parametrize("method", ALL)
@pytest.mark.parametrize("size", [2, 3, 5])
def test_ranks_do_not_matter(method, size):
    mesh = grid((9, 8), simplices=True)
    n, rng = mesh.n_cells, np.random.default_rng(1)
    per_cell = {
        "weight": rng.integers(0, 9, n),
        "group": np.where(rng.random(n) < 0.2, rng.integers(0, 9, n), -1),
        "limit_weight": np.ones(n, np.int64),
    }
    whole = {"level_sizes": (2, 3), "part_limit": np.full(6, 60)}
    graph = cell_graph(mesh)
    alone = split(mesh.centers, 6, method, graph=graph, **per_cell, **whole)

    def work(comm):
        low, high = n * comm.rank // size, n * (comm.rank + 1) // size
        mine = {name: values[low:high] for name, values in per_cell.items()}
        problem = Problem(
            mesh.centers[low:high], 6, np.ones(6), comm, lambda: graph, first_gid=low,
            **mine, **whole,
        )  # fmt: skip
        return METHODS[method].run(problem)

    assert (np.concatenate(run_ranks(size, work)) == alone).all()


def test_unfit_options():
    with pytest.raises(InputError, match="2 speeds for 3 parts"):
        split(np.zeros((5, 3)), 3, part_speed=np.ones(2))
    with pytest.raises(InputError, match="levels 2x2 do not multiply to 3 parts"):
        split(np.zeros((5, 3)), 3, level_sizes=(2, 2))
