"""Groups over slices against those of the whole mesh."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import sfcpart
from sfcpart.comm import run_ranks
from sfcpart.errors import WeightError
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.weights import (
    groups_from_boundaries,
    groups_from_field,
    groups_from_pairs,
    join_groups,
)
from tests.sliced import all_bounds, bounds, on_slices
from tests.strategies import group_numbers
from tests.unit.test_weights import with_sides


def centers(n):
    return Mesh.from_centers(np.zeros((n, 2)))


def over_slices(n, first, act):
    """Join what `act(held, rows)` returns for the rows of each rank."""
    found = on_slices(
        centers(n),
        first,
        lambda held: act(held, slice(held.first_gid, held.first_gid + held.n_local)),
    )
    return np.concatenate(found).tolist()


@st.composite
def fields(draw):
    n = draw(st.integers(1, 20))
    pool = draw(
        st.sampled_from(
            [
                np.array([-1.0, np.nan, 0.0, -0.0, 0.5, 1e300]),
                np.array([-3, -1, 0, 7]),
                np.array([0, 2**63, 5], np.uint64),
                np.array(["", "pier", "rock", "turbine"]),
                np.array([b"", b"pier", b"rock"]),
                np.array([False, True]),
                np.array([0.1, 0.5, -2.0], np.float32),
            ]
        )
    )
    pick = draw(st.lists(st.integers(0, len(pool) - 1), min_size=n, max_size=n))
    return pool[pick], draw(bounds(n))


@given(fields())
def test_fields(case):
    values, first = case
    whole = groups_from_field(values)
    for a in range(len(values)):  # the slow twin: equal values, equal groups
        if whole[a] >= 0:
            assert np.array_equal(whole == whole[a], values == values[a])
    found = over_slices(
        len(values), first, lambda held, rows: groups_from_field(values[rows], held=held)
    )
    assert found == whole.tolist()


def test_texts_may_be_longer_on_one_rank():
    def act(held):
        return groups_from_field([["a"], ["turbine"]][held.comm.rank], held=held)

    assert np.concatenate(on_slices(centers(2), [0, 1, 2], act)).tolist() == [0, 1]


@given(st.integers(1, 20).flatmap(lambda n: st.tuples(
    st.just(n), st.lists(st.tuples(*[st.integers(0, n - 1)] * 2), max_size=20), bounds(n)
)))  # fmt: skip
def test_pairs(case):
    n, pairs, first = case
    pairs = np.array(pairs, np.int64).reshape(-1, 2)
    size = len(first) - 1
    found = over_slices(
        n,
        first,
        lambda held, _: groups_from_pairs(pairs[held.comm.rank :: size], held=held),
    )
    assert found == groups_from_pairs(pairs, n_cells=n).tolist()


@given(st.integers(1, 20).flatmap(lambda n: st.tuples(
    st.lists(group_numbers(n), min_size=1, max_size=3), bounds(n)
)))  # fmt: skip
def test_joined_groups(case):
    groups, first = case
    found = over_slices(
        len(groups[0]),
        first,
        lambda held, rows: join_groups(*(group[rows] for group in groups), held=held),
    )
    assert found == join_groups(*groups).tolist()


@pytest.mark.parametrize("shape", [(5, 4), (4, 3, 2)])
def test_periodic_sides(shape):
    mesh = with_sides(shape)
    whole = groups_from_boundaries(mesh, ("inflow", "outflow"))
    for first in all_bounds(mesh.n_cells):
        found = on_slices(
            mesh, first, lambda held: groups_from_boundaries(held, ("inflow", "outflow"))
        )
        assert np.concatenate(found).tolist() == whole.tolist()


def test_sides_that_do_not_match_are_refused_on_all_ranks():
    mesh = with_sides((5, 4), skew=0.25)
    for sides, text in (
        (("inflow", "outflow"), "do not match by a shift"),
        (("inflow", "wall"), "no boundary group 'wall'"),
    ):
        with pytest.raises(WeightError, match=text):
            on_slices(
                mesh, [0, 7, 20], lambda held, sides=sides: groups_from_boundaries(held, sides)
            )


def test_an_element_of_no_cell_is_named():
    mesh = with_sides((3, 2))
    group = mesh.boundary[1]
    loose = type(group)("loose", 1, group.kind, group.indptr, np.array([3, 7, 1, 10]))
    odd = Mesh.from_arrays(
        mesh.points,
        {"quad": np.asarray(mesh.indices).reshape(-1, 4)},
        boundary=[mesh.boundary[0], loose],
    )
    for first in ([0, 6], [0, 2, 6]):
        with pytest.raises(WeightError, match="element 1 of boundary 'loose' is no face"):
            on_slices(odd, first, lambda held: groups_from_boundaries(held, ("inflow", "loose")))


def test_a_bad_pair_on_one_rank_is_raised_on_all():
    def act(held):
        return groups_from_pairs([[0, 1 + 9 * held.comm.rank]], held=held)

    with pytest.raises(WeightError, match=r"pair 0 is \(0, 10\); cells go from 0 to 3"):
        on_slices(centers(4), [0, 2, 4], act)


def test_groups_of_a_mesh_that_is_no_slice_are_refused():
    mesh = with_sides((3, 2))

    def act(comm):
        part = MeshSlice(mesh, comm, np.array([0, 6, 12]), mesh.n_points)
        return groups_from_boundaries(part, ("inflow", "outflow"))

    with pytest.raises(WeightError, match="not known across ranks"):
        run_ranks(2, act)


def test_a_split_of_slices_keeps_the_same_cells_together():
    mesh = with_sides((5, 4, 2)).with_cell_field("zone", np.arange(40) % 13 - 9.5)
    wish = {
        "together": "zone",
        "pairs": [[0, 39], [39, 20]],
        "periodic": [("inflow", "outflow")],
        "tolerance": 1.0,
    }
    whole = sfcpart.split(mesh, 3, **wish)
    assert whole.cell_part[0] == whole.cell_part[39] == whole.cell_part[20]
    for first in all_bounds(mesh.n_cells):
        found = on_slices(mesh, first, lambda held: sfcpart.split(held, 3, **wish).cell_part)
        assert np.concatenate(found).tolist() == whole.cell_part.tolist()
