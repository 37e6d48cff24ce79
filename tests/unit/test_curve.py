"""Keys and order of centres: scaling, ties, ranks, bad input."""

from __future__ import annotations

from itertools import pairwise

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.curve import CURVES, curve_keys, curve_order, curve_slice
from sfcpart.curve.order import SLACK
from sfcpart.errors import InputError
from tests.strategies import clouds, dyadic_clouds

curves = pytest.mark.parametrize("curve", CURVES)


def slices(n: int, size: int, seed: int = 0) -> list[slice]:
    """Cut n rows into `size` slices, some of them often empty."""
    edge = np.sort(np.random.default_rng(seed).integers(0, n + 1, size - 1))
    edge = np.concatenate(([0], edge, [n]))
    return [slice(a, b) for a, b in pairwise(edge)]


@curves
@given(centers=clouds())
def test_order_is_a_permutation_by_key(curve, centers):
    keys = curve_keys(centers, curve=curve)
    order = curve_order(centers, curve=curve)
    assert keys.dtype == order.dtype == np.int64
    assert keys.min() >= 0
    assert np.array_equal(np.sort(order), np.arange(len(centers)))
    assert (np.diff(keys[order]) >= 0).all()


@curves
@given(centers=dyadic_clouds(), power=st.integers(-200, 200), shift=st.integers(-(2**30), 2**30))
def test_dyadic_translation_and_scaling_change_nothing(curve, centers, power, shift):
    keys, order = curve_keys(centers, curve=curve), curve_order(centers, curve=curve)
    for moved in (centers + shift / 64, np.ldexp(centers, power), np.ldexp(centers, power) * 8):
        np.testing.assert_array_equal(curve_keys(moved, curve=curve), keys)
        np.testing.assert_array_equal(curve_order(moved, curve=curve), order)


@curves
@given(centers=dyadic_clouds(), seed=st.integers(0, 99))
def test_renumbering_moves_keys_along(curve, centers, seed):
    shuffle = np.random.default_rng(seed).permutation(len(centers))
    keys = curve_keys(centers, curve=curve)
    np.testing.assert_array_equal(curve_keys(centers[shuffle], curve=curve), keys[shuffle])
    order = curve_order(centers, curve=curve)
    moved = curve_order(centers[shuffle], curve=curve)
    np.testing.assert_array_equal(centers[shuffle][moved], centers[order])  # up to coincident ones


@curves
@pytest.mark.parametrize("size", [1, 2, 3, 4, 7])
@given(centers=dyadic_clouds(max_size=30), seed=st.integers(0, 99))
def test_same_order_on_any_number_of_ranks(curve, size, centers, seed):
    cut = slices(len(centers), size, seed)

    def work(comm):
        mine = centers[cut[comm.rank]]
        return curve_keys(mine, curve=curve, comm=comm), curve_order(mine, curve=curve, comm=comm)

    keys, order = zip(*run_ranks(size, work), strict=True)
    np.testing.assert_array_equal(np.concatenate(keys), curve_keys(centers, curve=curve))
    np.testing.assert_array_equal(np.concatenate(order), curve_order(centers, curve=curve))


def test_stretches_are_even_and_values_come_home():
    centers = np.random.default_rng(0).random((1000, 3))
    cut = slices(1000, 4)

    def work(comm):
        line = curve_slice(centers[cut[comm.rank]], comm=comm)
        values = np.arange(1000)[cut[comm.rank]]
        return len(line), np.array_equal(line.scatter(line.gather(values)), values)

    lengths, home = zip(*run_ranks(4, work), strict=True)
    assert sum(lengths) == 1000
    assert max(abs(length - 250) for length in lengths) <= 2 * SLACK * 250
    assert all(home)


@pytest.mark.parametrize("curve", ["hilbert", "morton"])
@pytest.mark.parametrize("axis", [0, 1, 2])
def test_flat_clouds_get_plane_keys(curve, axis):
    plane = np.random.default_rng(1).random((300, 2))
    flat = np.insert(plane, axis, 0.75, axis=1)
    np.testing.assert_array_equal(curve_keys(flat, curve=curve), curve_keys(plane, curve=curve))


@curves
def test_straight_clouds_are_ordered_along_the_line(curve):
    x = np.random.default_rng(2).permutation(500) * 2.0**-40
    line = np.zeros((500, 3))
    line[:, 1] = x + 3
    np.testing.assert_array_equal(curve_order(line, curve=curve), np.argsort(x))


@curves
def test_coincident_centres_keep_cell_order(curve):
    centers = np.full((50, 3), -7.25)
    assert not curve_keys(centers, curve=curve).any()
    np.testing.assert_array_equal(curve_order(centers, curve=curve), np.arange(50))


@pytest.mark.parametrize("dim", [2, 3])
@pytest.mark.parametrize("curve", ["hilbert", "morton"])
def test_shared_keys_are_ordered_by_the_deeper_key(curve, dim):
    # A cluster within one cell of the key's lattice is ordered as if it were alone: the deeper
    # bits continue the curve, in some orientation, so neighbours along it are neighbours.
    bits = {2: 31, 3: 21}[dim]
    side = 4
    small = np.stack(np.meshgrid(*[np.arange(side)] * dim, indexing="ij"), -1).reshape(-1, dim)
    rng = np.random.default_rng(0)
    rng.shuffle(small)
    # centres of a lattice of side 4 inside the first cell of the key lattice of [0, 2^bits - 1]
    centers = np.concatenate([(small + 0.5) / side, np.full((1, dim), 2.0**bits - 1)])
    centers = np.concatenate([np.zeros((1, dim)), centers])
    keys = curve_keys(centers, curve=curve)
    assert not keys[:-1].any()
    order = curve_order(centers, curve=curve)
    assert order[0] == 0
    assert order[-1] == len(centers) - 1
    path = small[order[1:-1] - 1]
    if curve == "hilbert":
        assert (np.abs(np.diff(path, axis=0)).sum(axis=1) == 1).all()
    else:
        alone = curve_order(small.astype(float), curve="morton")
        np.testing.assert_array_equal(path, small[alone])


@curves
@pytest.mark.parametrize(("dim", "axis"), [(2, 0), (2, 1), (3, 0), (3, 1), (3, 2)])
def test_centres_are_told_apart_to_42_bits_an_axis(curve, dim, axis):
    # A box of side 2^bits - 1 makes the scale 1, so that bit 42 of a coordinate is 2^(bits - 42).
    bits = {2: 31, 3: 21}[dim]
    start = np.random.default_rng(axis).integers(1, 2**41, 40) * 2.0 ** (bits - 41)
    centers = np.full((82, dim), 2.0 ** (bits - 1))
    centers[:40, axis], centers[40:80, axis] = start, start + 2.0 ** (bits - 42)
    centers[80], centers[81] = 0.0, 2.0**bits - 1
    assert len(np.unique(curve_keys(centers, curve=curve))) < 60  # pairs share their keys
    for seed in range(5):  # were a pair left to cell numbers, renumbering would turn it round
        shuffle = np.random.default_rng(seed).permutation(len(centers))
        moved = centers[shuffle]
        np.testing.assert_array_equal(
            moved[curve_order(moved, curve=curve)], centers[curve_order(centers, curve=curve)]
        )


@curves
def test_extreme_coordinates(curve):
    centers = np.random.default_rng(3).random((100, 2))
    keys = curve_keys(centers, curve=curve)
    for power in (-1000, 1000, 1023):
        np.testing.assert_array_equal(curve_keys(np.ldexp(centers, power), curve=curve), keys)
    wide = np.array([[-1.7e308, 0.0], [1.7e308, 1.0], [0.0, 0.5]])
    assert sorted(curve_order(wide, curve=curve).tolist()) == [0, 1, 2]
    tiny = np.array([[0.0, 5e-324], [1e-323, 0.0]])
    assert len(set(curve_keys(tiny, curve=curve).tolist())) == 2


def test_rows_go_by_the_last_axis_first():
    grid = np.stack(np.meshgrid(*[np.arange(4.0)] * 3, indexing="ij"), -1).reshape(-1, 3)
    order = curve_order(grid, curve="rows")
    np.testing.assert_array_equal(order, np.lexsort(grid.T))


def test_no_centres():
    assert curve_keys(np.empty((0, 3))).shape == (0,)
    assert curve_order(np.empty((0, 2))).tolist() == []
    assert run_ranks(3, lambda comm: curve_order(np.empty((0, 3)), comm=comm).tolist()) == [[]] * 3


@pytest.mark.parametrize(
    ("centers", "curve", "message"),
    [
        ([[0.0, 1.0], [np.nan, 2.0]], "hilbert", "centre 1 has nan on axis 0"),
        ([[0.0, np.inf], [0.0, 2.0]], "hilbert", "centre 0 has inf on axis 1"),
        ([1.0, 2.0], "hilbert", r"shape \(2,\)"),
        ([[1.0] * 4], "hilbert", r"shape \(1, 4\)"),
        ([[1.0, 2.0]], "peano", "curve 'peano' is unknown"),
    ],
)
def test_bad_input(centers, curve, message):
    with pytest.raises(InputError, match=message):
        curve_keys(centers, curve=curve)
    with pytest.raises(InputError, match=message):
        curve_order(centers, curve=curve, comm=SerialComm())


def test_bad_input_on_one_rank_fails_on_all():
    def work(comm):
        centers = np.zeros((3, 3))
        if comm.rank == 1:
            centers[2, 0] = np.nan
        return curve_keys(centers, comm=comm)

    with pytest.raises(InputError, match="centre 5 has nan on axis 0"):
        run_ranks(3, work)


def test_non_contiguous_and_integer_centres():
    grid = np.arange(24).reshape(8, 3)
    np.testing.assert_array_equal(curve_keys(grid), curve_keys(grid.astype(float)))
    fortran = np.asfortranarray(grid.astype(float))
    np.testing.assert_array_equal(curve_keys(fortran), curve_keys(grid))
