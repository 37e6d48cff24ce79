"""Recognise a uniform lattice of squares or cubes, on which exact bounds on the cut are known.

Everything is checked, nothing assumed: cell types, equal measures, one cell a site, every joined
pair one step apart along one axis, every cell with as many faces as a square or cube. Parts of the
lattice may be missing. Cost: linear; a mesh of other cells is refused at once.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.graph import CellGraph
from sfcpart.kernels.measure import count_off_lattice
from sfcpart.kernels.threads import run_ranges
from sfcpart.measure.gate import frozen

__all__ = ["Lattice", "find_lattice"]

_TOLERANCE = 1e-6
"""Allowed distance from a site, in cell sides, and relative difference of measures."""
_SAMPLE = 1024
_MOST_SITES = 64
"""A box with more sites a cell is not searched for shared sites, and not taken for a lattice."""


@dataclass(frozen=True)
class Lattice:
    """A uniform lattice.

    Attributes
    ----------
    dim : int
        Axes along which it has more than one cell (a slab of cubes has 2), at least 1.
    face_measure : float
        Measure of one face.
    boundary_faces : int
        Boundary faces across those axes.
    sides : tuple of int, or None
        Cells along those axes if the lattice fills its box and is joined everywhere inside.
    """

    dim: int
    face_measure: float
    boundary_faces: int
    sides: tuple[int, ...] | None


def find_lattice(centers: FloatArray, measures: FloatArray, graph: CellGraph) -> Lattice | None:
    """Return the lattice that the cells form, or None.

    Parameters
    ----------
    centers : (n_cells, dim) float64
        Cell centres, without the constant axis of a planar mesh.
    measures : (n_cells,) float64
    graph : CellGraph
    """
    dim = centers.shape[1]
    spacing = float(measures[0]) ** (1 / dim)
    if not spacing > 0 or not _is_regular(measures, graph, dim):
        return None
    low = np.array([column.min() for column in centers.T])
    high = np.array([column.max() for column in centers.T])
    n_sites = np.rint((high - low) / spacing) + 1
    if n_sites.prod() > _MOST_SITES * max(len(centers), _SAMPLE):
        return None
    sides = n_sites.astype(np.int64)
    if not _fits(centers, graph, low, spacing=spacing, sides=sides):
        return None
    long_sides = tuple(int(side) for side in sides if side > 1) or (1,)
    # Both faces of a cell across an axis of one cell are on the boundary.
    boundary = int(graph.boundary_count.sum()) - 2 * len(centers) * (dim - len(long_sides))
    is_full = _fills_box(sides, graph)
    face_measure = spacing ** (dim - 1)
    return Lattice(len(long_sides), face_measure, boundary, long_sides if is_full else None)


def _is_regular(measures: FloatArray, graph: CellGraph, dim: int) -> bool:
    """Tell whether all cells have one measure and the 2 dim faces of a square or cube."""
    first = float(measures[0])
    allowed = _TOLERANCE * first
    if np.abs(measures[:_SAMPLE] - first).max() > allowed:
        return False
    if measures.max() - first > allowed or first - measures.min() > allowed:
        return False
    n_faces = np.diff(graph.indptr) + graph.boundary_count
    return bool((n_faces == 2 * dim).all())


def _fits(
    centers: FloatArray, graph: CellGraph, origin: FloatArray, *, spacing: float, sides: Int64Array
) -> bool:
    """Tell whether cells lie on sites of their own, joined only one step apart."""
    is_taken = np.zeros(int(sides.prod()), np.bool_)
    n_bad = run_ranges(
        count_off_lattice,
        len(centers),
        frozen(graph.indptr),
        frozen(graph.indices),
        frozen(centers),
        origin,
        spacing,
        _TOLERANCE,
        sides,
        is_taken,
    )
    return sum(n_bad) == 0 and int(np.count_nonzero(is_taken)) == len(centers)


def _fills_box(sides: Int64Array, graph: CellGraph) -> bool:
    """Tell whether every site of the box is taken and every inner face joined."""
    n = graph.n_cells
    if int(sides.prod()) != n:
        return False
    return len(graph.indices) == 2 * sum(n - n // int(side) for side in sides)
