r"""Lower bounds: what no split can beat, so that a reader sees how far from the best a result is.

All bounds on the cut hold for splits into parts of the *same sizes* as those given (cells on a
lattice, measures elsewhere). Counting the surface of every part counts each cut face twice and
each boundary face once, so that cut = (sum of surfaces - boundary) / 2; bounding each surface from
below bounds the cut:

* by the isoperimetric inequality (ball, disc) on planar and solid meshes;
* by the least perimeter of n unit squares, 2 ceil(2 sqrt(n)) (Harary and Harborth 1976; OEIS
  A027709), and the least surface of n unit cubes (Alonso and Cerf, Electron. J. Combin. 3, 1996;
  OEIS A193416) on lattices.

On a full rectangle or cube the faces that part from the rest are bounded directly as well; see
`least_inner_perimeter` and `least_inner_surface`. Cost: linear in the number of distinct sizes.
"""

from __future__ import annotations

from collections.abc import Callable
from heapq import heapify, heapreplace
from math import cbrt, ceil, isqrt, pi, sqrt

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array

__all__ = [
    "bisection_width",
    "least_cut_measure",
    "least_imbalance",
    "least_inner_perimeter",
    "least_inner_surface",
    "least_lattice_cut",
    "least_perimeter",
    "least_surface",
    "least_surface_measure",
]

_ROUNDING = 1e-9
"""Relative slack taken off bounds that come from floating-point roots."""


def least_perimeter(n: int) -> int:
    """Return the least perimeter of `n` unit squares.

    Source: Harary and Harborth, J. Combin. Inf. System Sci. 1 (1976); OEIS A027709.

    Examples
    --------
    >>> [least_perimeter(n) for n in range(8)]
    [0, 4, 6, 8, 8, 10, 10, 12]
    """
    return 0 if n == 0 else 2 * (isqrt(4 * n - 1) + 1)


def least_surface(n: int) -> int:
    """Return the least surface of `n` unit cubes.

    2(ab + bc + ca) + (least perimeter of n - abc squares), where a x b x c is the largest box with
    sides that differ by at most 1 and no more than n cubes.
    Source: Alonso and Cerf, Electron. J. Combin. 3 (1996); OEIS A193416.

    Examples
    --------
    >>> [least_surface(n) for n in range(1, 9)]
    [6, 10, 14, 16, 20, 22, 24, 24]
    """
    if n == 0:
        return 0
    a = int(cbrt(n))
    while a * a * a > n:
        a -= 1
    while (a + 1) * (a + 1) * (a + 1) <= n:
        a += 1
    b = a + 1 if a * a * (a + 1) <= n else a
    c = a + 1 if b > a and a * b * b <= n else a
    return 2 * (a * b + b * c + c * a) + least_perimeter(n - a * b * c)


def least_inner_perimeter(n: int, sides: tuple[int, int]) -> float:
    """Bound the faces that part `n` squares of a full rectangle from its other squares.

    A row or column that holds squares of both kinds has at least one such face. Either all rows
    are mixed, or all columns are, or the unmixed ones are all of one kind; then the other kind
    lies in R mixed rows and C mixed columns, R C >= its number, so R + C >= 2 sqrt(it).
    (Elementary.)

    Examples
    --------
    >>> least_inner_perimeter(32, (8, 8)), least_inner_perimeter(4, (8, 8))
    (8, 4)
    """
    a, b = sides
    rest = a * b - n
    if n == 0 or rest == 0:
        return 0
    return min(a, b, least_perimeter(n) // 2, least_perimeter(rest) // 2)


def least_inner_surface(n: int, side: int) -> float:
    """Bound the faces that part `n` cubes of a full k^3 cube from its other cubes.

    min(3 m^(2/3), 2 sqrt(m k), k^2) with m = min(n, k^3 - n).
    Source: Bollobas and Leader, Edge-isoperimetric inequalities in the grid, Combinatorica 11
    (1991); the general form from memory, its case 1/4 <= m / k^3 as published.

    Examples
    --------
    >>> least_inner_surface(32, 4), least_inner_surface(1, 4)
    (16.0, 3.0)
    """
    m = min(n, side**3 - n)
    if m == 0:
        return 0
    return min(3.0 * cbrt(m * m), 2.0 * sqrt(m * side), float(side * side))


def bisection_width(side: int, dim: int) -> int:
    """Return the least faces cut by halving a full lattice of `side` cells along `dim` axes.

    side^(dim - 1) for even sides, (side^dim - 1) / (side - 1) for odd ones (published proof).

    Examples
    --------
    >>> bisection_width(4, 2), bisection_width(3, 2), bisection_width(3, 3)
    (4, 4, 13)
    """
    if side == 1:
        return 0
    if side % 2 == 0:
        return int(side ** (dim - 1))
    return int((side**dim - 1) // (side - 1))


def least_lattice_cut(
    part_size: Int64Array, *, dim: int, boundary_faces: int, sides: tuple[int, ...] | None = None
) -> int:
    """Bound the cut faces of a lattice of squares or cubes split into parts of given sizes.

    Parameters
    ----------
    part_size : (n_parts,) int64
        Cells of each part.
    dim : {1, 2, 3}
    boundary_faces : int
        Boundary faces of the mesh across these axes.
    sides : tuple of int, optional
        Cells along each axis if the mesh is a full box; sharper bounds apply then.

    Returns
    -------
    int
        The best of the bounds that apply, >= 0; never above the least cut.

    Examples
    --------
    Four squares of 4 cells in a 4 x 4 lattice: two crossing cuts of 4 faces.

    >>> least_lattice_cut(np.array([4, 4, 4, 4]), dim=2, boundary_faces=16, sides=(4, 4))
    8
    """
    sizes, times = np.unique(part_size[part_size > 0], return_counts=True)
    outer = _OUTER_BOUND[dim]
    bounds = [(_sum_over(outer, sizes, times) - boundary_faces) / 2]
    if sides is not None:
        inner = _inner_bound(sides)
        if inner is not None:
            bounds.append(_sum_over(inner, sizes, times) / 2)
        bounds.append(_halving_bound(sizes, times, sides))
    best = max(0.0, *bounds)
    return ceil(best - _ROUNDING * max(1.0, best))


_OUTER_BOUND: dict[int, Callable[[int], int]] = {
    1: lambda _: 2,
    2: least_perimeter,
    3: least_surface,
}


def _sum_over(bound: Callable[[int], float], sizes: Int64Array, times: Int64Array) -> float:
    """Add a bound over parts, each distinct size evaluated once."""
    return sum(bound(int(n)) * int(k) for n, k in zip(sizes, times, strict=True))


def _inner_bound(sides: tuple[int, ...]) -> Callable[[int], float] | None:
    """Choose the bound on inner faces that holds in a full box of these sides."""
    if len(sides) == 2:
        rectangle = (sides[0], sides[1])
        return lambda n: least_inner_perimeter(n, rectangle)
    if len(sides) == 3 and len(set(sides)) == 1:
        return lambda n: least_inner_surface(n, sides[0])
    return None


def _halving_bound(sizes: Int64Array, times: Int64Array, sides: tuple[int, ...]) -> int:
    """Return the bisection width where the parts halve a full square or cube, else 0."""
    halves_equally = int(times.sum()) == 2 and int(sizes[-1] - sizes[0]) <= 1
    if len(set(sides)) > 1 or not halves_equally:
        return 0
    return bisection_width(sides[0], len(sides))


def least_surface_measure(measure: FloatArray, *, dim: int) -> FloatArray:
    """Return the surface of the ball (perimeter of the disc) of each measure.

    Source: isoperimetric inequality.

    Examples
    --------
    >>> least_surface_measure(np.array([np.pi]), dim=2).round(4).tolist()
    [6.2832]
    """
    size: FloatArray = np.maximum(measure, 0.0)
    if dim == 2:
        return 2.0 * np.sqrt(pi * size)
    ball: FloatArray = (36.0 * pi) ** (1 / 3) * size ** (2 / 3)
    return ball


def least_cut_measure(part_measure: FloatArray, *, dim: int, boundary_measure: float) -> float:
    """Bound the cut measure of a planar or solid mesh split into parts of given measures.

    Examples
    --------
    >>> round(least_cut_measure(np.full(4, 1.0), dim=2, boundary_measure=8.0), 4)
    3.0898
    """
    surfaces = least_surface_measure(part_measure, dim=dim)
    bound = (float(surfaces.sum()) * (1 - _ROUNDING) - boundary_measure) / 2
    return max(0.0, bound)


def least_imbalance(n: float, speed: FloatArray, *, heaviest: float, is_equal: bool) -> float:
    """Return the least imbalance of cells of total weight `n` over ranks of these speeds.

    Parameters
    ----------
    n : float
        Total weight, or the number of cells where all weigh 1.
    speed : (n_parts,) float64
    heaviest : float
        Largest weight of one cell.
    is_equal : bool
        Whether all cells weigh the same: the result is then exact, else a lower bound.

    Notes
    -----
    With equal cells the least time is the smallest t with sum of floor(t speed / cell) >= cells:
    the share of each rank is rounded down and the cells left over go one by one to the rank that
    would finish first. O(n_parts log n_parts).

    Examples
    --------
    >>> round(least_imbalance(10, np.ones(4), heaviest=1, is_equal=True), 12)
    0.2
    """
    fair = n / float(speed.sum())
    if not fair > 0:
        return 0.0
    if not is_equal:
        return max(0.0, heaviest / float(speed.max()) / fair - 1.0)
    count = round(n / heaviest)
    return max(0.0, _least_time(count, speed) * heaviest / fair - 1.0)


def _least_time(count: int, speed: FloatArray) -> float:
    """Return the least time in which ranks of these speeds work off `count` equal cells."""
    cells = np.floor(count * (speed / speed.sum()) * (1 - _ROUNDING)).astype(np.int64)
    finish = (cells + 1) / speed
    queue = list(zip(finish.tolist(), range(len(speed)), strict=True))
    heapify(queue)
    for _ in range(count - int(cells.sum())):
        time, part = queue[0]
        heapreplace(queue, (time + 1 / float(speed[part]), part))
        cells[part] += 1
    return float((cells / speed).max())
