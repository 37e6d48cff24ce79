"""Inputs for property tests (hypothesis) and the degenerate meshes that every part must survive.

Coordinates are dyadic (multiples of 2^-10 in modest range) unless a strategy says otherwise, so
that translating and scaling by powers of two is exact.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Any

import numpy as np
from hypothesis import strategies as st
from hypothesis.extra import numpy as hnp

from sfcpart.mesh.mesh import Mesh

__all__ = [
    "DEGENERATE",
    "Case",
    "clouds",
    "dyadic_clouds",
    "grid",
    "group_numbers",
    "part_counts",
    "small_meshes",
    "weights",
]

TICK = 2.0**-10


# -- point clouds ---------------------------------------------------------------------------------


@st.composite
def dyadic_clouds(
    draw: st.DrawFn, *, dim: int | None = None, min_size: int = 1, max_size: int = 40
) -> np.ndarray:
    """Draw (n, dim) centres on a fine dyadic lattice; some of them often coincide."""
    dim = draw(st.sampled_from([2, 3])) if dim is None else dim
    n = draw(st.integers(min_size, max_size))
    reach = draw(st.sampled_from([2, 8, 1 << 10, 1 << 20]))  # small reach: many coincide
    whole = draw(hnp.arrays(np.int64, (n, dim), elements=st.integers(-reach, reach)))
    return whole * TICK


@st.composite
def _coincident(draw: st.DrawFn, dim: int, n: int) -> np.ndarray:
    point = draw(hnp.arrays(np.int64, (1, dim), elements=st.integers(-1000, 1000)))
    return np.repeat(point * TICK, n, axis=0)


@st.composite
def _collinear(draw: st.DrawFn, dim: int, n: int) -> np.ndarray:
    direction = draw(hnp.arrays(np.int64, (1, dim), elements=st.integers(-3, 3)))
    step = draw(hnp.arrays(np.int64, (n, 1), elements=st.integers(-500, 500)))
    return step * direction * TICK


@st.composite
def _any_floats(draw: st.DrawFn, dim: int, n: int) -> np.ndarray:
    size = draw(st.sampled_from([1.0, 1e-12, 1e12]))
    unit = st.floats(-1.0, 1.0, allow_subnormal=False)
    drawn = draw(hnp.arrays(np.float64, (n, dim), elements=unit))
    return np.where(np.abs(drawn) > 1e-100, drawn, 0.0) * size  # squares do not underflow


@st.composite
def clouds(
    draw: st.DrawFn, *, dim: int | None = None, min_size: int = 1, max_size: int = 40
) -> np.ndarray:
    """Draw (n, dim) finite centres: lattice, coincident, collinear, flat, or any floats."""
    dim = draw(st.sampled_from([2, 3])) if dim is None else dim
    n = draw(st.integers(min_size, max_size))
    shape = draw(st.sampled_from(["lattice", "coincident", "collinear", "flat", "floats"]))
    if shape == "coincident":
        return draw(_coincident(dim, n))
    if shape == "collinear":
        return draw(_collinear(dim, n))
    if shape == "floats":
        return draw(_any_floats(dim, n))
    points = draw(dyadic_clouds(dim=dim, min_size=n, max_size=n))
    if shape == "flat":
        points[:, draw(st.integers(0, dim - 1))] = 0.5
    return points


# -- weights, parts, groups -----------------------------------------------------------------------


def weights(n: int) -> st.SearchStrategy[np.ndarray]:
    """Draw (n,) weights: equal, small integers with zeros, one heavy cell, or floats.

    The floats are not so far apart that the small ones vanish, which is refused.
    """
    real = st.one_of(st.just(0.0), st.floats(1e-6, 1e6))
    heavy = st.tuples(st.integers(0, max(n - 1, 0)), st.integers(10, 10**9))
    return st.one_of(
        st.just(np.ones(n, np.int64)),
        hnp.arrays(np.int64, n, elements=st.integers(0, 9)),
        heavy.map(lambda pick: np.where(np.arange(n) == pick[0], pick[1], 1)),
        hnp.arrays(np.float64, n, elements=real),
    )


def part_counts(n_cells: int) -> st.SearchStrategy[int]:
    """Draw a number of parts from 1 to `n_cells`, the ends often."""
    return st.one_of(st.just(1), st.just(n_cells), st.integers(1, n_cells))


def group_numbers(n: int) -> st.SearchStrategy[np.ndarray]:
    """Draw (n,) keep-together groups: about half the cells free (-1), the rest in few groups."""
    return hnp.arrays(np.int64, n, elements=st.one_of(st.just(-1), st.integers(0, max(1, n // 3))))


# -- meshes ---------------------------------------------------------------------------------------


def grid(shape: tuple[int, ...], *, simplices: bool = False) -> Mesh:
    """Make a full grid of unit cells: quads or hexahedra, or each cut into 2 triangles or 6 tets.

    Cells are numbered with the first axis fastest.
    """
    points, cells = _grid_arrays(shape)
    if not simplices:
        return Mesh.from_arrays(points, {"quad" if len(shape) == 2 else "hexahedron": cells})
    if len(shape) == 2:
        cut = cells[:, [[0, 1, 2], [0, 2, 3]]].reshape(-1, 3)
        return Mesh.from_arrays(points, {"triangle": cut})
    # Six tets about the diagonal 0-6 (Kuhn's cut); it conforms between neighbours.
    paths = [(1, 2), (2, 3), (3, 7), (7, 4), (4, 5), (5, 1)]
    cut = cells[:, [[0, a, b, 6] for a, b in paths]].reshape(-1, 4)
    return Mesh.from_arrays(points, {"tetra": cut})


def _grid_arrays(shape: tuple[int, ...]) -> tuple[np.ndarray, np.ndarray]:
    """Return points and connectivity of a grid of quads or hexahedra."""
    extent = tuple(n + 1 for n in shape)
    axes = np.meshgrid(*[np.arange(n, dtype=np.float64) for n in extent], indexing="ij")
    points = np.stack([axis.ravel(order="F") for axis in axes], axis=1)
    number = np.arange(len(points)).reshape(extent, order="F")
    corners = [(0, 0), (1, 0), (1, 1), (0, 1)]
    if len(shape) == 3:
        corners = [(*corner, k) for k in (0, 1) for corner in corners]
    columns = [
        number[tuple(slice(c, c + n) for c, n in zip(corner, shape, strict=True))].ravel(order="F")
        for corner in corners
    ]
    return points, np.stack(columns, axis=1)


@st.composite
def small_meshes(draw: st.DrawFn, *, dim: int | None = None, max_side: int = 4) -> Mesh:
    """Draw a small valid mesh: grids of quads, triangles, hexes or tets, stretched, renumbered."""
    dim = draw(st.sampled_from([2, 3])) if dim is None else dim
    shape = tuple(draw(st.integers(1, max_side)) for _ in range(dim))
    mesh = grid(shape, simplices=draw(st.booleans()))
    name = {5: "triangle", 9: "quad", 10: "tetra", 12: "hexahedron"}[int(mesh.kind[0])]
    cells = np.asarray(mesh.indices).reshape(mesh.n_cells, -1)
    order = np.random.default_rng(draw(st.integers(0, 2**32 - 1))).permutation(len(cells))
    stretch = 2.0 ** np.array([draw(st.integers(-10, 10)) for _ in range(dim)])
    return Mesh.from_arrays(mesh.points * stretch, {name: cells[order]})


@dataclass(frozen=True)
class Case:
    """A mesh that often breaks programs, with the parts and weights that make it so."""

    mesh: Mesh
    n_parts: int
    weights: np.ndarray | None = None
    note: str = field(default="")


def _tets_and_friends() -> Mesh:
    """Make one cell each of the four corner-named 3-D kinds, joined in a chain through the hex."""
    points = [
        *[(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1)],
        *[(0.5, 0.5, 2), (1.5, 0.5, 1.5), (2, 0, 0.5), (2, 1, 0.5)],
    ]
    return Mesh.from_arrays(
        np.array(points, np.float64),
        {
            "tetra": np.array([[5, 6, 8, 9]]),
            "pyramid": np.array([[4, 5, 6, 7, 8]]),
            "wedge": np.array([[1, 10, 5, 2, 11, 6]]),
            "hexahedron": np.array([[0, 1, 2, 3, 4, 5, 6, 7]]),
        },
    )


def _mixed_plane() -> Mesh:
    """Make a triangle, a quad and a pentagon side by side."""
    points = [(0, 0), (1, 0), (2, 0), (2, 1), (1, 1), (0, 1), (3, 0), (3.5, 0.5), (3, 1)]
    return Mesh.from_arrays(
        np.array(points, np.float64),
        [
            ("quad", np.array([[1, 2, 3, 4]])),
            ("triangle", np.array([[0, 1, 4], [0, 4, 5]])),
            ("polygon", [[2, 6, 7, 8, 3]]),
        ],
    )


def _fins() -> Mesh:
    """Make four triangles in 3-D that all share one edge."""
    points = np.array(
        [(0, 0, 0), (0, 0, 1), (1, 0, 0), (0, 1, 0), (-1, 0, 0), (0, -1, 0)], np.float64
    )
    return Mesh.from_arrays(points, {"triangle": np.array([[0, 1, k] for k in (2, 3, 4, 5)])})


def _islands() -> Mesh:
    """Make three quads of which no two touch."""
    square = np.array([(0, 0), (1, 0), (1, 1), (0, 1)], np.float64)
    points = np.concatenate([square + np.array([3 * k, 5 * k]) for k in range(3)])
    return Mesh.from_arrays(points, {"quad": np.arange(12).reshape(3, 4)})


def _sheet(slope: float) -> Mesh:
    """Make a plane sheet of triangles in 3-D that climbs along x from z = 7."""
    mesh = grid((3, 3), simplices=True)
    points = np.column_stack([mesh.points, 7.0 + slope * mesh.points[:, 0]])
    return Mesh.from_arrays(points, {"triangle": np.asarray(mesh.indices).reshape(-1, 3)})


def _pancake() -> Mesh:
    """Make hexahedra without thickness: every measure is zero."""
    mesh = grid((2, 2, 1))
    points = mesh.points * (1.0, 1.0, 0.0)
    return Mesh.from_arrays(points, {"hexahedron": np.asarray(mesh.indices).reshape(-1, 8)})


def _ring() -> Mesh:
    """Make six cells in a ring, known by their faces only."""
    angle = np.arange(6) * np.pi / 3
    return Mesh.from_faces(
        np.column_stack([np.arange(6), (np.arange(6) + 1) % 6]),
        np.ones(6),
        np.column_stack([np.cos(angle), np.sin(angle)]),
        np.ones(6),
    )


def _zero_weights() -> Case:
    """Make a grid whose cells all weigh nothing."""
    return Case(grid((4, 2)), 3, np.zeros(8, np.int64))


DEGENERATE: dict[str, Callable[[], Case]] = {
    "one_cell": lambda: Case(grid((1, 1, 1)), 1),
    "one_triangle": lambda: Case(
        Mesh.from_arrays(np.eye(3)[:, :2], {"triangle": np.array([[0, 1, 2]])}), 1
    ),
    "parts_as_cells": lambda: Case(grid((5, 1)), 5),
    "zero_weights": _zero_weights,
    "one_weight": lambda: Case(grid((4, 2)), 3, np.array([0, 0, 0, 0, 0, 7, 0, 0])),
    "coincident_centers": lambda: Case(Mesh.from_centers(np.full((9, 3), 0.25)), 4),
    "coincident_cells": lambda: Case(
        Mesh.from_arrays(np.eye(4)[:, :3], {"tetra": np.array([[0, 1, 2, 3]] * 4)}), 2
    ),
    "centers_on_a_line": lambda: Case(
        Mesh.from_centers(np.column_stack([np.arange(7.0), np.zeros(7), np.zeros(7)])), 3
    ),
    "flat_in_space": lambda: Case(_sheet(0.0), 4),
    "tilted_in_space": lambda: Case(_sheet(0.5), 4),
    "zero_measure": lambda: Case(_pancake(), 2),
    "disconnected": lambda: Case(_islands(), 2),
    "non_manifold": lambda: Case(_fins(), 2),
    "mixed_plane": lambda: Case(_mixed_plane(), 2),
    "mixed_space": lambda: Case(_tets_and_friends(), 3),
    "faces_only": lambda: Case(_ring(), 3),
}
"""Cases by name; the fixture `degenerate` runs a test over all of them.

An empty mesh is none of them: no constructor makes one (`EMPTY` has the calls that must fail).
"""

EMPTY: dict[str, Callable[[], Any]] = {
    "no_cells": lambda: Mesh.from_arrays(np.zeros((3, 2)), {}),
    "no_rows": lambda: Mesh.from_arrays(np.zeros((3, 2)), {"triangle": np.zeros((0, 3), np.int64)}),
    "no_centers": lambda: Mesh.from_centers(np.zeros((0, 3))),
    "no_faces_no_centers": lambda: Mesh.from_faces(
        np.zeros((0, 2), np.int64), np.zeros(0), np.zeros((0, 3)), np.zeros(0)
    ),
}
"""Calls that must raise MeshError."""
