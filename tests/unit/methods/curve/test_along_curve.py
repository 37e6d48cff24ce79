"""Splitting along curves: levels, limits, groups, speeds, ranks."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.curve import curve_order
from sfcpart.errors import InputError, PartitionError, SfcpartError
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS
from sfcpart.partition import Partition
from tests.assertions import assert_partition
from tests.oracles.chunks import least_bottleneck
from tests.strategies import dyadic_clouds, group_numbers, part_counts

CURVE_METHODS = ["hilbert", "morton", "rows"]
PER_CELL = ("weight", "limit_weight", "group")


def problem(centers, n_parts, *, comm=None, rows=slice(None), **options) -> Problem:
    """Make the problem of the rank that holds `rows`."""
    mine = {k: v[rows] if k in PER_CELL and v is not None else v for k, v in options.items()}
    mine.setdefault("part_speed", np.ones(n_parts))
    return Problem(
        centers[rows], n_parts, mine.pop("part_speed"), comm or SerialComm(), lambda: None,
        first_gid=rows.start or 0, **mine,
    )  # fmt: skip


def split(centers, n_parts, method="hilbert", **options) -> np.ndarray:
    return METHODS[method].run(problem(centers, n_parts, **options))


def split_on(size, centers, n_parts, *, seed=0, method="hilbert", **options) -> np.ndarray:
    """Split on several ranks, with slices of any length."""
    edge = np.sort(np.random.default_rng(seed).integers(0, len(centers) + 1, size - 1))
    edge = np.concatenate(([0], edge, [len(centers)])).astype(int).tolist()

    def work(comm):
        rows = slice(edge[comm.rank], edge[comm.rank + 1])
        return METHODS[method].run(problem(centers, n_parts, comm=comm, rows=rows, **options))

    return np.concatenate(run_ranks(size, work))


@pytest.mark.parametrize("method", CURVE_METHODS)
@given(centers=dyadic_clouds(), data=st.data())
def test_parts_are_least_bottleneck_chunks_of_the_curve(method, centers, data):
    n = len(centers)
    n_parts = data.draw(part_counts(n))
    weight = np.array(data.draw(st.lists(st.integers(0, 30), min_size=n, max_size=n)), np.int64)
    speed = np.array(data.draw(st.lists(st.sampled_from([0.5, 1.0, 3.0]), min_size=n_parts,
                                        max_size=n_parts)))  # fmt: skip
    part = split(centers, n_parts, method, weight=weight, part_speed=speed)
    assert_partition(Partition.from_array(part, n_parts), n, n_parts, weights=weight)
    order = curve_order(centers, curve=method)
    assert (np.diff(part[order]) >= 0).all()
    if n <= 16:
        load = np.bincount(part, weights=weight, minlength=n_parts)
        assert (load / speed).max() == least_bottleneck(weight[order], speed)


@given(centers=dyadic_clouds(max_size=30), data=st.data())
def test_everything_at_once_is_the_same_on_any_number_of_ranks(centers, data):
    n = len(centers)
    sizes = data.draw(st.sampled_from([(1,), (3,), (2, 2), (2, 1, 3)]))
    n_parts = int(np.prod(sizes))
    options = {"level_sizes": sizes}
    if data.draw(st.booleans()):
        options["weight"] = np.array(
            data.draw(st.lists(st.integers(0, 9), min_size=n, max_size=n)), np.int64
        )
    if data.draw(st.booleans()):
        options["group"] = data.draw(group_numbers(n))
    if data.draw(st.booleans()):
        options["part_speed"] = np.linspace(1, 2, n_parts)
    if data.draw(st.booleans()):
        options["limit_weight"] = np.arange(n) % 3
        options["part_limit"] = np.full(n_parts, n * 2 // n_parts + 3)
    size, seed = data.draw(st.sampled_from([2, 3, 4, 7])), data.draw(st.integers(0, 99))
    try:
        alone = split(centers, n_parts, **options)
    except SfcpartError as refused:
        with pytest.raises(type(refused)) as caught:
            split_on(size, centers, n_parts, seed=seed, **options)
        assert str(caught.value) == str(refused)
        return
    np.testing.assert_array_equal(split_on(size, centers, n_parts, seed=seed, **options), alone)
    assert_partition(Partition.from_array(alone, n_parts), n, n_parts, groups=options.get("group"))
    if "part_limit" in options:
        held = np.bincount(alone, weights=options["limit_weight"], minlength=n_parts)
        assert (held <= options["part_limit"]).all()


@given(centers=dyadic_clouds(), data=st.data())
def test_renumbering_translation_and_scaling(centers, data):
    centers = np.unique(centers, axis=0)
    n_parts = data.draw(part_counts(len(centers)))
    part = split(centers, n_parts)
    shuffle = np.random.default_rng(data.draw(st.integers(0, 99))).permutation(len(centers))
    np.testing.assert_array_equal(split(centers[shuffle], n_parts), part[shuffle])
    np.testing.assert_array_equal(split(centers * 2.0**-20 + 0.125, n_parts), part)


def test_levels_are_nested_and_each_is_balanced():
    centers = np.random.default_rng(0).random((4000, 3))
    weight = np.random.default_rng(1).integers(1, 50, 4000)
    part = split(centers, 64, weight=weight, level_sizes=(4, 16))
    outer = split(centers, 4, weight=weight)
    np.testing.assert_array_equal(part // 16, outer)
    for node in range(4):
        load = np.bincount(part[outer == node] % 16, weights=weight[outer == node])
        assert load.max() <= load.mean() + 50


@given(centers=dyadic_clouds(max_size=16), data=st.data())
def test_each_level_has_the_least_bottleneck_with_weights_and_speeds(centers, data):
    # Weights and speeds so alike that every chunk of the first level has cells for two parts.
    n = len(centers)
    assume(n >= 10)
    weight = np.array(data.draw(st.lists(st.integers(4, 6), min_size=n, max_size=n)), np.int64)
    speed = np.array(data.draw(st.lists(st.sampled_from([1.0, 1.5]), min_size=4, max_size=4)))
    part = split(centers, 4, weight=weight, part_speed=speed, level_sizes=(2, 2))
    order = curve_order(centers)
    outer, pair_speed = part[order] // 2, speed.reshape(2, 2)
    load = np.bincount(outer, weights=weight[order])
    assert (load / pair_speed.sum(axis=1)).max() == least_bottleneck(
        weight[order], pair_speed.sum(axis=1)
    )
    for chunk in (0, 1):
        inside = order[outer == chunk]
        load = np.bincount(part[inside] % 2, weights=weight[inside])
        best = least_bottleneck(weight[inside], pair_speed[chunk])
        assert (load / pair_speed[chunk]).max() == best


def test_levels_leave_an_item_for_each_smallest_part():
    # One cell holds nearly all the work: its first-level chunk still gets four cells.
    centers = np.arange(32.0)[:, None] * [1.0, 0.0]
    weight = np.ones(32, np.int64)
    weight[5] = 10**9
    part = split(centers, 16, weight=weight, level_sizes=(4, 4))
    assert_partition(Partition.from_array(part, 16), 32, 16, weights=weight)


def test_speeds_of_smallest_parts_count_on_every_level():
    centers = np.arange(90.0)[:, None] * [1.0, 0.0]
    part = split(centers, 4, part_speed=np.array([1.0, 2.0, 3.0, 3.0]), level_sizes=(2, 2))
    assert np.bincount(part).tolist() == [10, 20, 30, 30]


def test_groups_are_never_separated():
    centers = np.arange(12.0)[:, None] * [1.0, 0.0]
    group = np.array([3, -1, -1, 3, -1, -1, -1, -1, -1, -1, 8, 8])
    part = split(centers, 3, group=group)
    assert part.tolist() == [0, 0, 0, 0, 1, 1, 1, 1, 2, 2, 2, 2]


def test_group_sits_at_its_first_member():
    centers = np.arange(10.0)[:, None] * [1.0, 0.0]
    group = np.full(10, -1)
    group[[0, 9]] = 4
    assert split(centers, 2, group=group).tolist() == [0, 0, 0, 0, 1, 1, 1, 1, 1, 0]


def test_heavy_group_is_named():
    centers = np.random.default_rng(0).random((20, 2))
    group = np.full(20, -1)
    group[[2, 7, 11]] = 42
    with pytest.raises(PartitionError, match="group 42 needs 3, but no part may hold more than 2"):
        split(
            centers, 12, group=group, limit_weight=np.ones(20, np.int64),
            part_limit=np.full(12, 2),
        )  # fmt: skip


def test_heavy_cell_is_named():
    limit_weight = np.ones(20, np.int64)
    limit_weight[13] = 9
    for run in (split, lambda *a, **k: split_on(3, *a, **k)):
        with pytest.raises(PartitionError, match="cell 13 alone needs 9"):
            run(
                np.random.default_rng(0).random((20, 2)), 4,
                limit_weight=limit_weight, part_limit=np.full(4, 8),
            )  # fmt: skip


def test_impossible_limits_are_refused_on_all_ranks():
    options = {"limit_weight": np.ones(30, np.int64), "part_limit": np.full(3, 9)}
    centers = np.random.default_rng(0).random((30, 3))
    for run in (split, lambda *a, **k: split_on(4, *a, **k)):
        with pytest.raises(PartitionError, match="need 30 in all, the 3 parts may hold 27"):
            run(centers, 3, **options)


def test_limits_that_bind_are_kept():
    centers = np.arange(8.0)[:, None] * [1.0, 0.0]
    memory = np.array([1, 1, 1, 1, 4, 4, 4, 4])
    part = split(centers, 4, limit_weight=memory, part_limit=np.array([4, 9, 8, 4]))
    held = np.bincount(part, weights=memory, minlength=4)
    assert (held <= [4, 9, 8, 4]).all()


def test_more_parts_than_cells():
    centers = np.arange(3.0)[:, None] * [1.0, 0.0]
    for n_parts in (4, 7, 100):
        part = split(centers, n_parts, weight=np.array([5, 1, 1]))
        assert len(np.unique(part)) == 3
        assert (np.diff(part) > 0).all()
    levels = split(centers, 8, level_sizes=(2, 4))
    assert len(np.unique(levels)) == 3
    # the fast parts get the cells
    speed = np.array([1.0, 9.0, 1.0, 9.0, 9.0, 1.0])
    assert split(centers, 6, part_speed=speed).tolist() == [1, 3, 4]


def test_few_cells_keep_limits():
    centers = np.arange(3.0)[:, None] * [1.0, 0.0]
    memory, limit = np.array([4, 1, 2]), np.array([1, 4, 1, 1, 2])
    part = split(centers, 5, limit_weight=memory, part_limit=limit)
    assert part[0] == 1
    assert part[2] == 4
    assert part[1] in (2, 3)


def test_limits_are_spelled_in_the_users_unit():
    options = {"limit_weight": np.full(6, 2**40), "limit_unit": 2.0**-40}
    centers = np.arange(6.0)[:, None] * [1.0, 0.0]
    with pytest.raises(PartitionError, match="need 6 in all, the 2 parts may hold 5"):
        split(centers, 2, part_limit=np.full(2, 5 * 2**39), **options)
    with pytest.raises(
        PartitionError, match="cell 0 alone needs 1, but no part may hold more than 0.5"
    ):
        split(centers, 2, part_limit=np.full(2, 2**39), **options)


def test_unlimited_parts_do_not_overflow():
    centers = np.random.default_rng(0).random((5000, 2))
    part = split(
        centers, 4096, limit_weight=np.full(5000, 2**40), part_limit=np.full(4096, 2**62),
        level_sizes=(4, 1024),
    )  # fmt: skip
    assert len(np.unique(part)) == 4096


def test_groups_that_leave_too_few_items():
    centers = np.random.default_rng(0).random((9, 2))
    with pytest.raises(PartitionError, match="groups leave fewer items than the 4 parts"):
        split(centers, 4, group=np.arange(9) % 3)


@pytest.mark.parametrize(
    ("options", "message"),
    [
        ({"part_speed": np.ones(2)}, "2 speeds for 3 parts"),
        ({"part_speed": np.array([1.0, 0.0, 1.0])}, "part 1 has speed 0"),
        ({"part_speed": np.array([1.0, 1.0, np.nan])}, "part 2 has speed nan"),
        ({"level_sizes": (2, 2)}, "levels 2x2 do not multiply to 3 parts"),
    ],
)
def test_unfit_options(options, message):
    with pytest.raises(InputError, match=message):
        split(np.zeros((5, 3)), 3, **options)


def test_limits_inside_a_level():
    centers = np.arange(8.0)[:, None] * [1.0, 0.0]
    memory = np.array([3, 3, 3, 1, 1, 1, 1, 1])
    with pytest.raises(PartitionError, match="inside chunk 0 of the level above, the limits"):
        split(
            centers, 4, level_sizes=(2, 2), limit_weight=memory, part_limit=np.full(4, 5),
            weight=np.array([1, 1, 1, 3, 2, 2, 1, 1]),
        )  # fmt: skip


def test_centre_that_is_not_finite():
    with pytest.raises(InputError, match="centre 2 has nan"):
        split(np.array([[0.0, 0], [0, 1], [np.nan, 0]]), 2)


def test_degenerate_meshes(degenerate):
    weights = degenerate.weights
    if weights is not None:
        weights = weights.astype(np.int64)
    for method in CURVE_METHODS:
        part = split(degenerate.mesh.centers, degenerate.n_parts, method, weight=weights)
        assert_partition(
            Partition.from_array(part, degenerate.n_parts), degenerate.mesh, degenerate.n_parts,
            weights=weights,
        )  # fmt: skip


def test_registry():
    for name in CURVE_METHODS:
        method = METHODS[name]
        assert method.name == name
        assert not method.needs_graph
        assert method.summary
    with pytest.raises(TypeError):
        METHODS["new"] = METHODS["hilbert"]
