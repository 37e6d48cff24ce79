"""Bounds on the cut against published values, and never above a cut that exists."""

from __future__ import annotations

import itertools
from math import ceil, floor, pi, sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.curve import curve_order
from sfcpart.measure import assess_partition
from sfcpart.measure.bounds import (
    bisection_width,
    least_cut_measure,
    least_imbalance,
    least_inner_perimeter,
    least_inner_surface,
    least_lattice_cut,
    least_perimeter,
    least_surface,
    least_surface_measure,
)
from sfcpart.partition import Partition
from tests.oracles.lattice_cuts import (
    least_cuts_of_all_splits,
    least_faces_of_subsets,
    least_faces_of_towers,
)
from tests.oracles.lattices import box, lattice_graph, lattice_mesh


def test_least_perimeter_is_a027709():
    # OEIS A027709, minimal perimeter of a polyomino with n squares, n = 0 .. 21 (from memory;
    # formula 2 ceil(2 sqrt(n)), Harary and Harborth 1976).
    listed = [0, 4, 6, 8, 8, 10, 10, 12, 12, 12, 14, 14, 14, 16, 16, 16, 16, 18, 18, 18, 18, 20]
    assert [least_perimeter(n) for n in range(22)] == listed
    assert all(least_perimeter(n * n) == 4 * n for n in range(1, 2000))
    assert least_perimeter(10**16 + 1) == 4 * 10**8 + 2  # no rounding of large roots


def test_least_surface_is_a193416():
    # OEIS A193416, minimal surface of a polycube with n cubes, n = 1 .. 13; Alonso and Cerf 1996.
    listed = [6, 10, 14, 16, 20, 22, 24, 24, 28, 30, 32, 32, 36]
    assert [least_surface(n) for n in range(1, 14)] == listed
    assert least_surface(0) == 0
    assert all(least_surface(n**3) == 6 * n * n for n in range(1, 300))
    assert least_surface(13) > 34  # not the best box of 14, A075777


@pytest.mark.parametrize("side", [3, 4, 5, 6])
def test_no_set_of_squares_has_less_perimeter_and_some_has_as_much(side):
    found = least_faces_of_subsets((side, side), with_boundary=True)
    assert found == [least_perimeter(n) for n in range(side * side + 1)]


def test_no_set_of_cubes_has_less_surface_and_some_has_as_much():
    found = least_faces_of_subsets((3, 3, 3), with_boundary=True)
    assert found == [least_surface(n) for n in range(28)]


@pytest.mark.parametrize("sides", [(a, b) for a in range(1, 7) for b in range(1, 7)])
def test_inner_perimeter_is_never_above_the_least(sides):
    found = least_faces_of_subsets(sides, with_boundary=False)
    bound = [least_inner_perimeter(n, sides) for n in range(len(found))]
    assert all(low <= least for low, least in zip(bound, found, strict=True))
    assert sum(found) - sum(bound) <= len(found)  # and close: off by at most one on average


@pytest.mark.parametrize("side", [1, 2, 3])
def test_inner_surface_is_never_above_the_least_over_all_subsets(side):
    found = least_faces_of_subsets((side,) * 3, with_boundary=False)
    assert found == least_faces_of_towers(side)  # the short cut of the next test
    bound = [least_inner_surface(n, side) for n in range(len(found))]
    assert all(low <= least + 1e-9 for low, least in zip(bound, found, strict=True))


@pytest.mark.parametrize("side", [4, 5])
def test_inner_surface_is_never_above_the_least_over_down_sets(side):
    found = least_faces_of_towers(side)
    bound = [least_inner_surface(n, side) for n in range(len(found))]
    assert all(low <= least + 1e-9 for low, least in zip(bound, found, strict=True))


@pytest.mark.parametrize(
    ("side", "dim"), [(2, 2), (3, 2), (8, 2), (31, 2), (2, 3), (3, 3), (8, 3), (11, 3)]
)
def test_quarter_to_three_quarters_cuts_a_layer(side, dim):
    # Bollobas and Leader 1991: both parts between 1/4 and 3/4 of a k^n grid cut k^(n-1) or more.
    for n in range(ceil(side**dim / 4), floor(3 * side**dim / 4) + 1):
        sizes = np.array([n, side**dim - n])
        boundary = 2 * dim * side ** (dim - 1)
        bound = least_lattice_cut(sizes, dim=dim, boundary_faces=boundary, sides=(side,) * dim)
        assert bound >= side ** (dim - 1)


@pytest.mark.parametrize(("side", "dim"), [(2, 2), (3, 2), (4, 2), (5, 2), (6, 2), (2, 3), (3, 3)])
def test_bisection_width_is_what_trying_everything_finds(side, dim):
    # Published: N^(r-1) for N even, (N^r - 1)/(N - 1) for N odd.
    found = least_faces_of_subsets((side,) * dim, with_boundary=False)
    assert found[side**dim // 2] == bisection_width(side, dim)


SMALL = [
    ((3, 3), 2), ((3, 3), 3), ((3, 3), 4), ((4, 3), 2), ((4, 3), 3), ((4, 4), 2), ((5, 3), 2),
    ((6, 2), 3), ((9, 1), 4), ((2, 2, 2), 2), ((2, 2, 2), 4), ((3, 2, 2), 3), ((4, 2, 2), 2),
    ((5, 2, 1), 3),
]  # fmt: skip


@pytest.mark.parametrize(("sides", "n_parts"), SMALL)
def test_no_split_of_a_small_box_is_below_the_bound(sides, n_parts):
    _assert_below_all_splits(box(*sides), n_parts, sides)


@pytest.mark.parametrize("seed", range(12))
def test_no_split_of_a_ragged_lattice_is_below_the_bound(seed):
    random = np.random.default_rng(seed)
    sides = [(4, 3), (5, 2), (3, 2, 2)][seed % 3]
    sites = [site for site in box(*sides) if random.random() < 0.75]
    _assert_below_all_splits(sites, 3, None)


def _assert_below_all_splits(sites, n_parts, sides):
    graph = lattice_graph(sites)
    rows = np.repeat(np.arange(len(sites)), np.diff(graph.indptr))
    edges = np.stack([rows, graph.indices], axis=1)[rows < graph.indices]
    least = least_cuts_of_all_splits(edges, len(sites), n_parts)
    boundary = int(graph.boundary_count.sum())
    for sizes, cut in least.items():
        bound = least_lattice_cut(
            np.array(sizes), dim=len(sites[0]), boundary_faces=boundary, sides=sides
        )
        assert bound <= cut, sizes
    assert len(least) > 1


@given(
    sides=st.sampled_from([(6, 6), (6, 5), (5, 5), (6, 3), (4, 4, 4), (3, 3, 3), (4, 3, 2)]),
    n_parts=st.integers(1, 9),
    seed=st.integers(0, 2**32 - 1),
    keep=st.sampled_from([1.0, 0.9, 0.6]),
    compact=st.booleans(),
)
def test_no_random_split_is_below_the_bounds(sides, n_parts, seed, keep, compact):
    random = np.random.default_rng(seed)
    sites = [site for site in box(*sides) if random.random() < keep] or box(*sides)
    at = np.array(sites, float)
    if compact:  # nearest of n_parts points: compact parts come close to the bound
        seeds = random.random((n_parts, len(sides))) * sides
        cell_part = ((at[:, None] + 0.5 - seeds[None]) ** 2).sum(axis=2).argmin(axis=1)
    else:
        cell_part = random.integers(0, n_parts, len(sites))
    found = assess_partition(
        lattice_mesh(sites), lattice_graph(sites), Partition.from_array(cell_part, n_parts)
    ).total
    assert found["least_cut_faces"] is not None
    assert found["least_cut_faces"] <= found["cut_faces"]
    assert (found["least_cut_measure"] or 0) <= found["cut_measure"] * (1 + 1e-9)


def _interleaved(n_bits, dim):
    """Return the Morton key of every site of a full lattice, by strings of bits."""
    words = [format(k, f"0{n_bits}b") for k in range(2**n_bits)]
    return {
        site: int("".join("".join(bits) for bits in zip(*(words[x] for x in site), strict=True)), 2)
        for site in itertools.product(range(2**n_bits), repeat=dim)
    }


@pytest.mark.parametrize("n_parts", [2, 4, 8, 16, 32, 64])
def test_chunks_of_a_square(n_parts):
    # Elementary: p = 4^j chunks of the (Morton or Hilbert) curve are squares and cut
    # 2 N (2^j - 1) faces; p = 2 4^j adds N 2^j.
    key = _interleaved(6, 2)
    sites = box(64, 64)
    cell_part = [key[site] * n_parts // 64**2 for site in sites]
    found = assess_partition(
        lattice_mesh(sites), lattice_graph(sites), Partition.from_array(cell_part)
    ).total
    assert found["cut_faces"] == {2: 64, 4: 128, 8: 256, 16: 384, 32: 640, 64: 896}[n_parts]
    if n_parts in (2, 4, 16, 64):  # halves are optimal too
        assert found["least_cut_faces"] == found["cut_faces"]
    assert 0.8 * found["cut_faces"] <= found["least_cut_faces"] <= found["cut_faces"]


@pytest.mark.parametrize("n_parts", [2, 4, 8, 16, 32, 64])
def test_chunks_of_a_cube(n_parts):
    # Elementary: p = 8^j {1, 2, 4} chunks cut 3 N^2 (2^j - 1) + {0, 1, 2} N^2 2^j faces.
    key = _interleaved(4, 3)
    sites = box(16, 16, 16)
    cell_part = [key[site] * n_parts // 16**3 for site in sites]
    found = assess_partition(
        lattice_mesh(sites), lattice_graph(sites), Partition.from_array(cell_part)
    ).total
    assert found["cut_faces"] == {2: 256, 4: 512, 8: 768, 16: 1280, 32: 1792, 64: 2304}[n_parts]
    if n_parts in (2, 8, 64):
        assert found["least_cut_faces"] == found["cut_faces"]
    assert 0.7 * found["cut_faces"] <= found["least_cut_faces"] <= found["cut_faces"]


def test_isoperimetric_surfaces():
    # Circle 2 pi r of area pi r^2; sphere 4 pi r^2 of volume 4/3 pi r^3 (elementary).
    radius = np.array([0.0, 0.5, 3.0])
    disc = least_surface_measure(pi * radius**2, dim=2)
    ball = least_surface_measure(4 / 3 * pi * radius**3, dim=3)
    assert disc.tolist() == pytest.approx((2 * pi * radius).tolist())
    assert ball.tolist() == pytest.approx((4 * pi * radius**2).tolist())


def test_continuous_bound_of_a_halved_disc_stays_below_its_diameter():
    half = np.full(2, pi / 2)
    bound = least_cut_measure(half, dim=2, boundary_measure=2 * pi)
    assert bound == pytest.approx(pi * (sqrt(2) - 1))
    assert bound < 2


@given(st.integers(0, 40), st.lists(st.integers(1, 9), min_size=1, max_size=5))
def test_least_imbalance_is_the_best_of_all_counts(n, speeds):
    speed = np.array(speeds, float)
    found = least_imbalance(n, speed, heaviest=1.0, is_equal=True)
    # The best time is reached by some count on some rank: the smallest that suffices.
    times = sorted({k / s for s in speeds for k in range(n + 1)})
    best = next(t for t in times if sum(floor(t * s + 1e-9) for s in speeds) >= n)
    assert found == pytest.approx(best / (n / speed.sum()) - 1 if n else 0.0, abs=1e-9)


def test_a_heavy_cell_bounds_the_imbalance():
    # max(W/P, w_max) <= bottleneck (from memory, elementary)
    found = least_imbalance(17, np.ones(4), heaviest=10, is_equal=False)
    assert found == pytest.approx(10 / (17 / 4) - 1)


def test_hilbert_chunks_of_a_square_are_as_far_from_the_bound_as_computed_elsewhere():
    # 128 x 128, p = 8 .. 128: the cut averages 1.38 of (sum of least perimeters - boundary) / 2.
    # Computed independently of this project; the 2-D Hilbert curve has one form.
    n = 128
    x, y = np.meshgrid(np.arange(n), np.arange(n), indexing="ij")
    order = curve_order(np.stack([x.ravel(), y.ravel()], axis=1).astype(float))
    ratios = []
    for n_parts in range(8, 129):
        grid = np.empty(n * n, np.int32)
        grid[order] = np.arange(n * n) * n_parts // (n * n)
        grid = grid.reshape(n, n)
        cut = sum(int(np.count_nonzero(np.diff(grid, axis=axis))) for axis in (0, 1))
        size = np.bincount(grid.ravel())
        bound = least_lattice_cut(size, dim=2, boundary_faces=4 * n, sides=(n, n))
        assert bound <= cut
        ratios.append(cut / bound)
    assert round(float(np.mean(ratios)), 2) == 1.38
