"""Assessments over slices against those of the whole mesh, bit for bit."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import PartitionError, WeightError
from sfcpart.graph import cell_graph
from sfcpart.measure import assess_partition, assess_slice
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.slices.fixed import FixedPoint, fixed_sum
from sfcpart.slices.graph_slice import graph_slice
from tests.sliced import all_bounds, bounds, on_slices
from tests.strategies import grid, small_meshes, weights

PAIR_COLUMNS = ("part", "neighbour", "faces", "sent_cells", "received_cells")


def known_faces(mesh):
    return mesh.points is not None or mesh.faces is not None


def assert_same(mesh, cell_part, n_parts, first, **given_values):
    """Assert that slices give the bits of the whole."""
    cell_names = [name for name in ("weights", "limit_weights") if name in given_values]
    graph = cell_graph(mesh) if known_faces(mesh) else None
    partition = Partition.from_array(cell_part, n_parts)
    whole = assess_partition(mesh, graph, partition, **given_values)

    def act(held):
        mine = slice(held.first_gid, held.first_gid + held.n_local)
        local = {k: v[mine] if k in cell_names else v for k, v in given_values.items()}
        rows = graph_slice(held) if graph is not None else None
        part = Partition.from_array(partition.cell_part[mine], n_parts)
        return assess_slice(held, rows, part, **local)

    found = on_slices(mesh, first, act)
    for one in found:
        assert one.total == whole.total or (  # NaN differs from itself
            repr(dict(one.total)) == repr(dict(whole.total))
        )
        for name, column in whole.part.items():
            if column is None:
                assert one.part[name] is None
            else:
                assert one.part[name].dtype == column.dtype
                assert one.part[name].tobytes() == column.tobytes(), name
        assert one.empty_parts.tolist() == whole.empty_parts.tolist()
        assert one.split_parts.tolist() == whole.split_parts.tolist()
    assert all(one.pairs is None for one in found[1:])
    if whole.pairs is not None:
        for name in PAIR_COLUMNS:
            assert np.array_equal(getattr(found[0].pairs, name), getattr(whole.pairs, name))


@st.composite
def cases(draw):
    mesh = draw(small_meshes())
    n = mesh.n_cells
    n_parts = draw(st.integers(1, n + 2))
    part = draw(st.lists(st.integers(0, n_parts - 1), min_size=n, max_size=n))
    extra = {}
    if draw(st.booleans()):
        extra["weights"] = draw(weights(n))
    if draw(st.booleans()):
        extra["speeds"] = 1.0 + np.arange(n_parts) % 3
    if draw(st.booleans()):
        extra |= {"limit_weights": draw(weights(n)), "limits": 5.0}
    return mesh, part, n_parts, draw(bounds(n)), extra


@settings(max_examples=25)
@given(cases())
def test_slices_give_the_bits_of_the_whole(case):
    *where, extra = case
    assert_same(*where, **extra)


def test_degenerate_meshes(degenerate):
    mesh, n_parts = degenerate.mesh, degenerate.n_parts
    part = np.arange(mesh.n_cells) * n_parts // mesh.n_cells
    extra = {} if degenerate.weights is None else {"weights": degenerate.weights}
    for first in all_bounds(mesh.n_cells):
        assert_same(mesh, part, n_parts, first, **extra)


@pytest.mark.parametrize("shape", [(6, 5), (4, 3, 2), (4, 4)])
def test_lattices_are_found_over_slices(shape):
    mesh = grid(shape)
    part = np.arange(mesh.n_cells) * 4 // mesh.n_cells
    graph = cell_graph(mesh)
    assert assess_partition(mesh, graph, Partition.from_array(part)).total["least_cut_faces"]
    for first in all_bounds(mesh.n_cells):
        assert_same(mesh, part, 4, first)


def test_cells_on_one_site_are_no_lattice_wherever_they_lie():
    twice = Mesh.from_faces(  # joined like a lattice, but two cells share a centre
        np.array([[0, 1], [1, 2], [2, 3], *[[k, -1] for k in (0, 0, 0, 1, 1, 2, 2, 3, 3, 3)]]),
        np.ones(13),
        np.array([[0, 0], [1, 0], [0, 0], [1, 0]], float),
        np.ones(4),
    )
    for first in ([0, 4], [0, 2, 4], [0, 1, 1, 4]):
        assert_same(twice, [0, 0, 1, 1], 2, first)
    assert (
        assess_partition(twice, cell_graph(twice), Partition.from_array([0, 0, 1, 1])).total[
            "least_cut_faces"
        ]
        is None
    )


def test_cells_of_infinite_size_keep_to_their_part():
    points = np.array([[0, 0, 0], [1e200, 0, 0], [0, 1e200, 0], [0, 0, 1e200], [1, 1, 1]])
    mesh = Mesh.from_arrays(points, {"tetra": [[0, 1, 2, 3], [0, 1, 2, 4]]})
    whole = assess_partition(mesh, cell_graph(mesh), Partition.from_array([0, 1]))
    assert np.isinf(whole.part["measure"][0])
    assert_same(mesh, [0, 1], 2, [0, 1, 2])


def test_errors_are_those_of_the_first_rank_that_fails():
    mesh = grid((4, 2))

    def act(held, part, **extra):
        return assess_slice(held, graph_slice(held), Partition.from_array(part, 2), **extra)

    with pytest.raises(WeightError, match=r"weights\[6\] is -1"):
        on_slices(
            mesh,
            [0, 4, 8],
            lambda held: act(held, [0] * 4, weights=np.where(held.cell_gid == 6, -1, 1)),
        )
    with pytest.raises(PartitionError, match="3 cells, the mesh 4"):
        on_slices(mesh, [0, 4, 8], lambda held: act(held, [0] * (4 - held.comm.rank)))
    with pytest.raises(WeightError, match=r"largest: weights\[5\]"):
        on_slices(
            mesh,
            [0, 4, 8],
            lambda held: act(held, [0] * 4, weights=np.where(held.cell_gid > 4, 1e308, 1)),
        )


def test_one_weight_near_the_largest_number_is_no_error():
    mesh = grid((4, 2))
    heavy = np.where(np.arange(8) == 5, 1.7e308, 1.0)
    assert_same(mesh, [0] * 4 + [1] * 4, 2, [0, 3, 8], weights=heavy)


@given(
    st.lists(st.floats(-1e300, 1e300) | st.floats(-1, 1) | st.integers(-9, 9), max_size=20),
    st.integers(1, 4),
    st.randoms(),
)
def test_fixed_sums_do_not_depend_on_order_or_ranks(values, size, random):
    values = np.array(values, float)
    whole = fixed_sum(values, n_values=len(values), comm=SerialComm())
    largest = np.abs(values).max(initial=0)
    assert abs(whole - np.sum(values.astype(np.longdouble))) <= 1e-15 * largest * len(values)
    mixed = values[random.sample(range(len(values)), len(values))]
    found = run_ranks(
        size, lambda comm: fixed_sum(mixed[comm.rank :: size], n_values=len(values), comm=comm)
    )
    assert found == [whole] * size


def test_fixed_sums_are_exact_for_whole_numbers():
    values = np.random.default_rng(0).integers(0, 2**40, 8000)
    found = fixed_sum(values.astype(float), n_values=8000, comm=SerialComm())
    assert found == float(sum(values.tolist()))
    tiny = fixed_sum(np.full(3, 5e-324), n_values=3, comm=SerialComm())
    assert tiny in (0.0, 1.5e-323)
    assert fixed_sum(np.array([1e308, 1e308]), n_values=2, comm=SerialComm()) == np.inf
    assert np.isnan(fixed_sum(np.array([np.nan, 1]), n_values=2, comm=SerialComm()))
    assert FixedPoint.of(0.0, 5).value(np.array([0]), np.array([0])).tolist() == [0.0]
