"""Quantised weights, specifications of weights, and groups."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from sfcpart.comm import run_ranks
from sfcpart.errors import WeightError
from sfcpart.graph import cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.weights import (
    cell_weights,
    groups_from_boundaries,
    groups_from_field,
    groups_from_pairs,
    join_groups,
    parse_weights,
    quantise,
    quantise_limits,
)
from tests.strategies import grid

finite = st.floats(0, 1e300, allow_nan=False)


# -- quantising -----------------------------------------------------------------------------------


@given(st.lists(finite, min_size=1, max_size=40))
def test_headroom_and_rounding(weights):
    assume(max(weights) > 0)
    try:
        found = quantise(weights)
    except WeightError as refused:
        assert "vanish" in str(refused)
        return
    assert 0 < sum(found.values.tolist()) <= 2**53
    assert found.values.dtype == np.int64
    scale = Fraction(2) ** found.exponent
    for value, weight in zip(found.values.tolist(), weights, strict=True):
        assert abs(value - Fraction(weight) * scale) <= Fraction(1, 2)


@given(st.lists(st.floats(0.5, 2.0), min_size=1, max_size=40))
def test_nearly_all_bits_are_used(weights):
    assume(any(w != int(w) for w in weights))
    assert sum(quantise(weights).values.tolist()) >= 2**49


@given(st.lists(st.integers(0, 2**40), min_size=1, max_size=40), st.sampled_from("iuf"))
def test_whole_numbers_with_a_small_sum_are_kept(weights, kind):
    assume(any(weights))
    found = quantise(np.array(weights, f"{kind}8"))
    assert found.exponent == 0
    assert found.unit == 1.0
    assert found.values.tolist() == weights


@given(st.lists(st.floats(0.5, 1e6), min_size=1, max_size=30), st.integers(-500, 500))
def test_power_of_two_scaling(weights, power):
    assume(any(w != int(w) for w in weights))
    scaled = np.ldexp(weights, power)
    assume(np.any(scaled != np.floor(scaled)))
    base, moved = quantise(weights), quantise(scaled)
    np.testing.assert_array_equal(moved.values, base.values)
    assert moved.exponent == base.exponent - power


@pytest.mark.parametrize("size", [2, 3, 4, 7])
def test_same_integers_on_any_number_of_ranks(size):
    weights = np.random.default_rng(size).lognormal(0, 3, 50)
    edge = [0, *sorted(np.random.default_rng(0).integers(0, 51, size - 1)), 50]

    def work(comm):
        mine = slice(edge[comm.rank], edge[comm.rank + 1])
        found = quantise(weights[mine], comm=comm, first_gid=edge[comm.rank])
        return found.values, found.exponent

    values, exponent = zip(*run_ranks(size, work), strict=True)
    alone = quantise(weights)
    np.testing.assert_array_equal(np.concatenate(values), alone.values)
    assert set(exponent) == {alone.exponent}


def test_large_integers_are_rounded_not_wrapped():
    found = quantise(np.array([2**63, 2**63 + 2**40, 2**62], np.uint64))
    assert (found.values > 0).all()
    assert sum(found.values.tolist()) <= 2**53


@pytest.mark.parametrize(
    ("weights", "message"),
    [
        ([1.0, -2.0, -3.0], "cell 1 has weight -2.0; wanted finite numbers >= 0"),
        ([1, 2, -3], "cell 2 has weight -3"),
        ([1.0, np.nan], "cell 1 has weight nan"),
        ([np.inf, 1.0], "cell 0 has weight inf"),
        ([0.0, 0.0], "all 2 weights are zero"),
        ([0, 0, 0], "all 3 weights are zero"),
        ([1.0, 1.0, 1e300, 1.0], "cell 2 has a weight so huge"),
        (["a", "b"], "wanted real numbers"),
        ([1j], "wanted real numbers"),
        ([[1.0], [2.0]], r"shape \(2, 1\)"),
    ],
)
def test_bad_weights(weights, message):
    with pytest.raises(WeightError, match=message):
        quantise(weights)


def test_first_offender_is_named_across_ranks():
    def work(comm):
        weights = np.ones(4)
        if comm.rank > 0:
            weights[comm.rank] = -1
        return quantise(weights, comm=comm, first_gid=4 * comm.rank, what="memory")

    with pytest.raises(WeightError, match="cell 5 has memory -1.0"):
        run_ranks(3, work)


def test_huge_weight_is_named_across_ranks():
    def work(comm):
        weights = np.ones(4)
        weights[2] = 1e300 if comm.rank == 1 else 1
        return quantise(weights, comm=comm, first_gid=4 * comm.rank)

    with pytest.raises(WeightError, match="cell 6 has a weight so huge"):
        run_ranks(3, work)


def test_sum_of_the_others_keeps_its_resolution():
    weights = np.ones(100_000)
    weights[7] = 99_999
    assert quantise(weights + 0.25).values[0] > 2**30


def test_limits():
    found = quantise([0.5, 0.25])
    limit = quantise_limits([0.75, 1e308, np.inf], found.exponent)
    assert limit[0] == found.values.sum()
    assert (limit[1:] >= found.values.sum()).all()
    with pytest.raises(WeightError, match="limit of part 1 is -1.0"):
        quantise_limits([1.0, -1.0], 0)


# -- specifications -------------------------------------------------------------------------------


@pytest.fixture
def mesh() -> Mesh:
    """Make a quad between two triangles: the water, the rock bed, the water."""
    return Mesh.from_arrays(
        [[0, 0], [2, 0], [2, 1], [0, 1], [3, 0], [-1, 0]],
        {"triangle": [[1, 4, 2], [0, 3, 5]], "quad": [[0, 1, 2, 3]]},
        cell_fields={
            "cost": [1.0, 2.0, 4.0],
            "zone": [7, -1, 7],
            "gmsh:physical": [1, 1, 2],
            "a*b": [1, 2, 3],
            "name": np.array(["water", "rock bed", "water"]),
            "velocity": np.zeros((3, 3)),
            "half": [0.5, 1.0, 1.0],
        },
    )


@pytest.mark.parametrize(
    ("spec", "expected"),
    [
        ("cost", [1, 2, 4]),
        ("a*b", [1, 2, 3]),
        ("2.5", [2.5] * 3),
        ("triangle=1,quad=3", [1, 1, 3]),
        (" triangle = 1 , other = 5 ", [1, 1, 5]),
        ("zone:7=2,-1=10", [2, 10, 2]),
        ("zone:-1=10,other=0", [0, 10, 0]),
        ("name:water=1,rock bed=9", [1, 9, 1]),
        ("gmsh:physical:1=2,2=8", [2, 2, 8]),
        ("cell=1,face=0.5", [2.5, 2.5, 3]),
        ("face=1", [3, 3, 4]),
        ("cost * zone:7=2,-1=10 * 0.5", [1, 10, 4]),
        (["cost", "triangle=3,quad=1"], [3, 6, 4]),
        (["a*b", "cost"], [1, 4, 12]),
        ([1.0, 2.0, 3.0], [1, 2, 3]),
        (np.array([4, 5, 6]), [4, 5, 6]),
    ],
)
def test_specifications(mesh, spec, expected):
    weight = cell_weights(mesh, spec, graph=lambda: cell_graph(mesh))
    assert weight.tolist() == pytest.approx(expected)


def test_parsed_once_used_often(mesh):
    spec = parse_weights("cost * face=1")
    assert spec.needs_graph
    assert not parse_weights("cost").needs_graph
    assert cell_weights(mesh, spec, graph=cell_graph(mesh)).tolist() == [3, 6, 16]


@pytest.mark.parametrize(
    ("spec", "message"),
    [
        ("work", "no cell field 'work'; the mesh has 'a.b', 'cost', 'gmsh:physical', 'half'"),
        ("cost *", "a factor is missing beside"),
        ("", "wanted a field or a table"),
        ("tetra=1,hexahedron=2", "no weight for kind of cell triangle, quad; add it, or other="),
        ("triangle=1,brick=2", "'brick' is no kind of cell"),
        ("triangle=one", "'one' is no number"),
        ("triangle=1,quad", "'quad' is no NAME=NUMBER"),
        ("triangle=1,triangle=2", "a name is given twice"),
        (":7=2", "a field is missing before ':'"),
        ("zone:7=2", "no weight for value of cell field 'zone' -1"),
        ("half:1=2,other=1", "cell field 'half' holds 0.5; regions are whole numbers or text"),
        ("velocity", r"cell field 'velocity' has shape \(3, 3\)"),
        ("name", "cell field 'name' has shape"),
        ("cell=1,face=2", "need the cell graph"),
        ([1.0, 2.0], r"weights have shape \(2,\); wanted one a cell, \(3,\)"),
    ],
)
def test_bad_specifications(mesh, spec, message):
    with pytest.raises(WeightError, match=message):
        cell_weights(mesh, spec)


# -- groups ---------------------------------------------------------------------------------------


def test_groups_from_fields():
    assert groups_from_field(np.array([5, -3, 5, 0])).tolist() == [5, -1, 5, 0]
    assert groups_from_field([1.5, np.nan, 1.5, -1.0]).tolist() == [0, -1, 0, -1]
    assert groups_from_field(["pier", "", "pier"]).tolist() == [0, -1, 0]
    assert groups_from_field(np.array([2**63, 1], np.uint64)).tolist() == [0, 1]
    with pytest.raises(WeightError, match="wanted one number a cell"):
        groups_from_field(np.zeros((3, 2)))


@given(st.lists(st.tuples(st.integers(0, 11), st.integers(0, 11)), max_size=20))
def test_groups_from_pairs_are_the_connected_cells(pairs):
    group = groups_from_pairs(np.array(pairs, int).reshape(-1, 2), n_cells=12)
    block = [{cell} for cell in range(12)]
    for a, b in pairs:
        union = block[a] | block[b]
        for cell in union:
            block[cell] = union
    assert group.tolist() == [min(b) if len(b) > 1 else -1 for b in block]


def test_bad_pairs():
    with pytest.raises(WeightError, match=r"pair 1 is \(3, 9\); cells go from 0 to 4"):
        groups_from_pairs([[0, 1], [3, 9]], n_cells=5)
    with pytest.raises(WeightError, match=r"shape \(3,\)"):
        groups_from_pairs([1, 2, 3], n_cells=5)
    with pytest.raises(WeightError, match="type float64"):
        groups_from_pairs([[0.0, 1.0]], n_cells=5)


def test_joined_groups():
    first = np.array([1, 1, -1, -1, -1, 4])
    second = np.array([-1, 9, 9, -1, 3, -1])
    assert join_groups(first, second).tolist() == [0, 0, 0, -1, -1, -1]


def with_sides(shape: tuple[int, ...], *, skew: float = 0.0) -> Mesh:
    """Make a grid whose sides at both ends of the first axis are groups "inflow", "outflow"."""
    mesh = grid(shape)
    points = np.array(mesh.points)
    ends = [np.flatnonzero(points[:, 0] == x) for x in (0, shape[0])]
    cells = np.asarray(mesh.indices).reshape(mesh.n_cells, -1)
    name = "line" if len(shape) == 2 else "quad"
    groups = []
    for label, end in zip(("inflow", "outflow"), ends, strict=True):
        faces = [[p for p in cell if p in end] for cell in cells]
        faces = [face for face in faces if face]
        if label == "outflow":
            faces = faces[::-1]
        made = Mesh.from_arrays(points, [(str(mesh_kind(shape)), cells), (name, faces)])
        group = made.boundary[0]
        groups.append(type(group)(label, 1, group.kind, group.indptr, group.indices))
    points[ends[1], 1] += skew * (points[ends[1], 1] > 0) * (points[ends[1], 1] < shape[1])
    return Mesh.from_arrays(points, {mesh_kind(shape): cells}, boundary=groups)


def mesh_kind(shape: tuple[int, ...]) -> str:
    return "quad" if len(shape) == 2 else "hexahedron"


@pytest.mark.parametrize("shape", [(5, 4), (4, 3, 2)])
def test_periodic_sides_are_paired(shape):
    mesh = with_sides(shape)
    group = groups_from_boundaries(mesh, ("inflow", "outflow"))
    x = mesh.centers[:, 0]
    inside = (x > 1) & (x < shape[0] - 1)
    assert (group[inside] == -1).all()
    for number in np.unique(group[~inside]):
        pair = mesh.centers[group == number]
        assert len(pair) == 2
        np.testing.assert_allclose(
            np.abs(pair[0] - pair[1]), [shape[0] - 1, *[0] * (len(shape) - 1)]
        )
    assert np.count_nonzero(group >= 0) == 2 * np.prod(shape[1:])


def test_sides_that_do_not_match():
    mesh = with_sides((5, 4), skew=0.25)
    with pytest.raises(WeightError, match="do not match by a shift: the centre of element"):
        groups_from_boundaries(mesh, ("inflow", "outflow"))
    assert (groups_from_boundaries(mesh, ("inflow", "outflow"), tolerance=0.2) >= 0).any()
    with pytest.raises(WeightError, match="no boundary group 'wall'; the mesh has 'inflow', 'out"):
        groups_from_boundaries(mesh, ("inflow", "wall"))
    fewer = mesh.boundary[1]
    fewer = type(fewer)("outflow", 1, fewer.kind[:2], fewer.indptr[:3], fewer.indices[:4])
    odd = Mesh.from_arrays(mesh.points, {"quad": np.asarray(mesh.indices).reshape(-1, 4)},
                           boundary=[mesh.boundary[0], fewer])  # fmt: skip
    with pytest.raises(WeightError, match="'inflow' has 4 elements and 'outflow' 2"):
        groups_from_boundaries(odd, ("inflow", "outflow"))


def test_element_behind_which_there_is_no_cell():
    mesh = with_sides((3, 2))
    group = mesh.boundary[1]
    loose = type(group)("loose", 1, group.kind, group.indptr, np.array([0, 11, 1, 10]))
    odd = Mesh.from_arrays(mesh.points, {"quad": np.asarray(mesh.indices).reshape(-1, 4)},
                           boundary=[mesh.boundary[0], loose])  # fmt: skip
    with pytest.raises(WeightError):
        groups_from_boundaries(odd, ("inflow", "loose"), tolerance=99.0)


def test_polyhedra_have_their_points_in_faces():
    cube = np.array([[x, y, z] for x in (0, 1, 2) for y in (0, 1) for z in (0, 1)], float)
    faces = [[0, 1, 3, 2], [4, 5, 7, 6], [0, 1, 5, 4], [2, 3, 7, 6], [0, 2, 6, 4], [1, 3, 7, 5]]
    cells = [faces, [[p + 4 for p in face] for face in faces]]
    ends = [Mesh.from_arrays(cube, [("polyhedron", cells), ("quad", [face])]).boundary[0]
            for face in ([0, 1, 3, 2], [8, 9, 11, 10])]  # fmt: skip
    sides = [type(g)(n, 1, g.kind, g.indptr, g.indices) for n, g in zip("ab", ends, strict=True)]
    mesh = Mesh.from_arrays(cube, {"polyhedron": cells}, boundary=sides)
    assert groups_from_boundaries(mesh, ("a", "b")).tolist() == [0, 0]
