"""Curve keys against published values and properties, and against another implementation."""

from __future__ import annotations

from itertools import permutations, product

import numpy as np
import pytest
from scipy.sparse.csgraph import connected_components

from sfcpart.curve import curve_keys, curve_order
from sfcpart.kernels.curve.hilbert import BITS, skilling_index
from tests.oracles.lattices import lattice_graph


def full_grid(side: int, dim: int) -> np.ndarray:
    """Centres of a full grid, the last axis fastest."""
    return np.array(list(product(range(side), repeat=dim))) + 0.5


def walk(side: int, dim: int, curve: str = "hilbert") -> np.ndarray:
    """Cells of a full grid in curve order."""
    grid = full_grid(side, dim)
    return (grid[curve_order(grid, curve=curve)] - 0.5).astype(int)


def corners_pinned(cells: np.ndarray, bits: int) -> np.ndarray:
    """Add the two corners of the cube, so that cells keep their integer coordinates."""
    corner = np.zeros((2, cells.shape[1]))
    corner[1] = 2**bits - 1
    return np.concatenate([corner, cells])


def test_skillings_example():
    # J. Skilling, Programming the Hilbert curve, AIP Conf. Proc. 707, 381 (2004): the point
    # (5, 10, 20) of a 32^3 cube has index 7865 = 001111010111001b [read].
    assert skilling_index((5, 10, 20), 5) == 7865
    keys = curve_keys(corners_pinned(np.array([[5.0, 10.0, 20.0]]), 5))
    assert int(keys[2]) >> 3 * (BITS[3] - 5) == 7865 == 0b001111010111001


@pytest.mark.parametrize("dim", [2, 3])
def test_table_agrees_with_the_bit_construction(dim):
    # The same paper's loop over bits, against the widened table, on all bits of a key.
    bits = BITS[dim]
    cells = np.random.default_rng(dim).integers(0, 2**bits, (200, dim)).astype(np.float64)
    keys = curve_keys(corners_pinned(cells, bits))
    expected = [skilling_index(tuple(map(int, cell)), bits) for cell in cells]
    assert keys[2:].tolist() == expected
    assert keys.min() >= 0


def test_plane_walk_is_a059252_and_a059253():
    # OEIS A059252 (x) and A059253 (y), first 16 terms [read]. Our walk on a grid of even order
    # has the axes exchanged, on one of odd order it has not.
    x = [0, 0, 1, 1, 2, 3, 3, 2, 2, 3, 3, 2, 1, 1, 0, 0]
    y = [0, 1, 1, 0, 0, 0, 1, 1, 2, 2, 3, 3, 3, 2, 2, 3]
    assert walk(2, 2).T.tolist() == [x[:4], y[:4]]
    assert walk(4, 2).T.tolist() == [y, x]
    assert walk(8, 2)[:16].T.tolist() == [x, y]


@pytest.mark.parametrize(("side", "dim"), [(2, 2), (16, 2), (32, 2), (2, 3), (4, 3), (8, 3)])
def test_successive_cells_touch_and_sub_cubes_are_filled(side, dim):
    # Definition of a Hilbert curve (e.g. H. Haverkort, arXiv:1109.2323).
    cells = walk(side, dim)
    assert (np.abs(np.diff(cells, axis=0)).sum(axis=1) == 1).all()
    level = 1
    while 2**level <= side:
        block = cells.reshape(-1, 2 ** (dim * level), dim) // 2**level
        assert (block == block[:, :1]).all()
        level += 1


@pytest.mark.parametrize("curve", ["hilbert", "morton"])
@pytest.mark.parametrize(("side", "dim"), [(16, 2), (8, 3)])
def test_pieces_of_key_intervals(curve, side, dim):
    # Hilbert: every interval is face-connected (follows from adjacency). Morton: at most 2
    # components in any dimension: Burstedde, Holke, Isaac, Found. Comput. Math. 19:843 (2019).
    order = curve_order(full_grid(side, dim), curve=curve)
    graph = lattice_graph(list(product(range(side), repeat=dim))).to_scipy().tocsr()
    rng = np.random.default_rng(0)
    seen = set()
    for _ in range(150):
        begin, end = np.sort(rng.choice(len(order) + 1, 2, replace=False))
        inside = order[begin:end]
        seen.add(connected_components(graph[inside][:, inside])[0])
    assert seen == ({1} if curve == "hilbert" else {1, 2})


def test_locality_in_the_plane():
    # distance^2 / gap stays below 6 (Euclid: Bauman 2006) and 9 (Manhattan: Niedermeier,
    # Reinhardt, Sanders 2002); the maxima of orders 3..6 [computed].
    euclid = {3: 3.6250, 4: 4.4815, 5: 5.2326, 6: 5.6199}
    manhattan = {3: 6.2500, 4: 7.5625, 5: 8.2656, 6: 8.6289}
    for order in euclid:
        cells = walk(2**order, 2)
        worst = np.zeros(2)
        for gap in range(1, len(cells)):
            step = np.abs(cells[gap:] - cells[:-gap])
            squares = (step**2).sum(axis=1).max(), step.sum(axis=1).max() ** 2
            worst = np.maximum(worst, np.array(squares) / gap)
        assert worst == pytest.approx([euclid[order], manhattan[order]], abs=5e-5)
        assert (worst < [6, 9]).all()


def test_locality_in_space():
    # distance^dim / gap <= (dim + 3)^(dim / 2) 2^dim = 117.6 in 3-D: Gotsman, Lindenbaum 1996
    # (as quoted by a third party).
    cells = walk(16, 3)
    worst = max(
        float(((cells[gap:] - cells[:-gap]) ** 2).sum(axis=1).max()) ** 1.5 / gap
        for gap in range(1, len(cells))
    )
    assert 8 < worst <= 6**1.5 * 8


@pytest.mark.parametrize(("k", "n"), [(1, 2), (1, 4), (2, 3), (3, 2)])
def test_mean_number_of_intervals_in_a_window(k, n):
    # Moon, Jagadish, Faloutsos, Saltz, IEEE TKDE 13(1) (2001), exact count for 2^k x 2^k windows
    # of a 2^(k+n) grid [memory, verified].
    side, window = 2 ** (k + n), 2**k
    grid = full_grid(side, 2)
    place = np.empty(side * side, int)
    place[curve_order(grid)] = np.arange(side * side)
    place = place.reshape(side, side)
    counts = [
        np.count_nonzero(np.diff(np.sort(place[i : i + window, j : j + window].ravel())) > 1) + 1
        for i in range(side - window + 1)
        for j in range(side - window + 1)
    ]
    total = (2**n - 1) ** 2 * 2 ** (3 * k) + (2**n - 1) * 2 ** (2 * k) + 2**n
    assert sum(counts) == total
    assert np.mean(counts) == pytest.approx(total / (side - window + 1) ** 2)


@pytest.mark.parametrize(("dim", "bits"), [(2, 4), (3, 3)])
def test_pypi_hilbertcurve_up_to_a_symmetry(dim, bits):
    # The package `hilbertcurve` on PyPI; its axes may be exchanged or run backwards.
    from hilbertcurve.hilbertcurve import HilbertCurve

    cells = np.array(list(product(range(2**bits), repeat=dim)))
    theirs = np.array(HilbertCurve(bits, dim).distances_from_points(cells.tolist()))
    ours = curve_keys(cells.astype(np.float64)) >> dim * (BITS[dim] - bits)
    found = False
    for axes in permutations(range(dim)):
        for flips in product((0, 1), repeat=dim):
            turned = np.where(flips, 2**bits - 1 - cells, cells)[:, axes]
            number = np.ravel_multi_index(tuple(turned.T), (2**bits,) * dim)
            found |= np.array_equal(theirs[number], ours)
    assert found


def test_morton_keys_interleave_bits():
    # Definition of the Z-order curve; the first axis has the most significant bit.
    cells = np.array(list(product(range(8), repeat=3)))
    keys = curve_keys(cells.astype(np.float64), curve="morton") >> 3 * (BITS[3] - 3)
    digits = [
        int("".join(f"{x >> b & 1}{y >> b & 1}{z >> b & 1}" for b in (2, 1, 0)), 2)
        for x, y, z in cells.tolist()
    ]
    assert keys.tolist() == digits
