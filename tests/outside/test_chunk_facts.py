"""Chunks against published bounds and computed optima, and cuts of full grids."""

from __future__ import annotations

from itertools import product

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart.comm import SerialComm
from sfcpart.methods.curve.chunks import cut_line
from sfcpart.methods.curve.line import Line
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS
from tests.oracles.chunks import bottleneck_of, lattice_cut, least_bottleneck

DIGITS_OF_PI = [3, 1, 4, 1, 5, 9, 2, 6, 5, 3, 5, 8, 9, 7, 9, 3]


def cuts(weight: list[int], speed: list[float]) -> np.ndarray:
    line = Line.of(
        len(weight), weight=np.array(weight, np.int64), limit_weight=None, reach=1,
        comm=SerialComm(),
    )  # fmt: skip
    return cut_line(line, begin=0, end=len(weight), speed=np.array(speed, np.float64))


def grid_parts(side: int, dim: int, n_parts: int, method: str) -> np.ndarray:
    centers = np.array(list(product(range(side), repeat=dim))) * 0.25 + 1.0
    problem = Problem(centers, n_parts, np.ones(n_parts), SerialComm(), graph=lambda: None)
    return METHODS[method].run(problem).reshape((side,) * dim)


@pytest.mark.parametrize("method", ["hilbert", "morton"])
@pytest.mark.parametrize(
    ("side", "dim", "faces"),
    [
        (64, 2, [64, 128, 256, 384, 640, 896]),
        (16, 3, [256, 512, 768, 1280, 1792, 2304]),
    ],
)
def test_cut_of_full_grids(method, side, dim, faces):
    # 2-D N x N: 4^j parts cut 2N(2^j - 1) faces, 2*4^j parts N 2^j more; 3-D N^3: 8^j {1, 2, 4}
    # parts cut 3N^2(2^j - 1) + {0, 1, 2} N^2 2^j [computed, elementary].
    found = [lattice_cut(grid_parts(side, dim, p, method)) for p in (2, 4, 8, 16, 32, 64)]
    assert found == faces


@pytest.mark.parametrize(("n_parts", "best"), [(2, 41), (3, 28), (4, 23), (5, 19), (6, 16)])
def test_optima_of_the_digits_of_pi(n_parts, best):
    # [computed] by exhaustive search, here again by the oracle.
    speed = [1.0] * n_parts
    assert bottleneck_of(cuts(DIGITS_OF_PI, speed), DIGITS_OF_PI, speed) == best
    assert least_bottleneck(DIGITS_OF_PI, speed) == best


def test_optima_where_the_nearest_cut_fails():
    # [computed]: cutting nearest to i W / P gives 7 for the first and an empty part for the second.
    assert bottleneck_of(cuts([3, 2, 5, 2], [1.0] * 3), [3, 2, 5, 2], [1.0] * 3) == 5
    heavy_last = [1, 1, 1, 1, 1, 1, 1, 10]
    cut = cuts(heavy_last, [1.0] * 4)
    assert (np.diff(cut) > 0).all()
    assert bottleneck_of(cut, heavy_last, [1.0] * 4) == 10


def test_optimum_with_speeds():
    # [computed]; parts of different speed in fixed order: Pinar, Tabak, Aykanat, JPDC 68:1473.
    speed = [1.0, 1.0, 2.0, 4.0]
    assert bottleneck_of(cuts(DIGITS_OF_PI, speed), DIGITS_OF_PI, speed) == 11


@given(st.lists(st.integers(0, 99), min_size=1, max_size=40), st.data())
def test_bounds_of_the_bottleneck(weight, data):
    # max(W/P, w_max) <= B* <= W/P + w_max (P-1)/P, from memory (after Pinar, Aykanat, JPDC 64:974
    # (2004)); that no part may be empty costs nothing at equal speeds.
    n_parts = data.draw(st.integers(1, len(weight)))
    best = bottleneck_of(cuts(weight, [1.0] * n_parts), weight, [1.0] * n_parts)
    total, heaviest = sum(weight), max(weight)
    assert best * n_parts >= total
    assert best >= heaviest
    assert best * n_parts <= total + heaviest * (n_parts - 1)


@pytest.mark.large
def test_blocks_beat_strips():
    # Common practice, no source: compact parts have fewer faces than strips.
    for n_parts in (4, 16, 64):
        hilbert = lattice_cut(grid_parts(64, 2, n_parts, "hilbert"))
        rows = lattice_cut(grid_parts(64, 2, n_parts, "rows"))
        assert rows == 64 * (n_parts - 1)
        assert hilbert < rows
