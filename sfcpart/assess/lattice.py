"""Recognise a uniform lattice of squares or cubes, on which exact bounds on the cut are known.

Everything is checked, nothing assumed: cell types, equal measures, one cell a site, every joined
pair one step apart along one axis, every cell with as many faces as a square or cube. Parts of the
lattice may be missing. Cost: linear; a mesh of other cells is refused at once.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int32Array
from sfcpart.graph import CellGraph
from sfcpart.kernels.measure import count_off_lattice
from sfcpart.kernels.threads import run_ranges

__all__ = ["Lattice", "find_lattice"]

_TOLERANCE = 1e-6
"""Allowed distance from a site, in cell sides, and relative difference of measures."""
_SAMPLE = 1024
_MOST_EMPTY_SITES = 64
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
    origin = centers.min(axis=0)
    if not _lies_on_sites(centers[:_SAMPLE], origin, spacing):
        return None
    site = _sites(centers, origin, spacing)
    if site is None or not _has_own_sites(site):
        return None
    off = run_ranges(count_off_lattice, len(site), graph.indptr, graph.indices, site)
    if sum(off):
        return None
    sides = tuple(int(n) for n in site.max(axis=0) + 1)
    long_sides = tuple(side for side in sides if side > 1) or (1,)
    is_full = _fills_box(sides, graph)
    # Both faces of a cell across an axis of one cell are on the boundary.
    boundary = int(graph.boundary_count.sum()) - 2 * len(site) * (dim - len(long_sides))
    face_measure = spacing ** (dim - 1)
    return Lattice(len(long_sides), face_measure, boundary, long_sides if is_full else None)


def _is_regular(measures: FloatArray, graph: CellGraph, dim: int) -> bool:
    """Tell whether all cells have one measure and the 2 dim faces of a square or cube."""
    first = float(measures[0])
    sample = measures[:_SAMPLE]
    if np.abs(sample - first).max() > _TOLERANCE * first:
        return False
    n_faces = np.diff(graph.indptr) + graph.boundary_count
    return bool(
        (n_faces == 2 * dim).all()
        and measures.max() - first <= _TOLERANCE * first
        and first - measures.min() <= _TOLERANCE * first
    )


def _lies_on_sites(centers: FloatArray, origin: FloatArray, spacing: float) -> bool:
    """Tell whether centres are whole multiples of the spacing away from the origin."""
    steps = (centers - origin) / spacing
    return bool((np.abs(steps - np.rint(steps)) <= _TOLERANCE * np.maximum(1.0, steps)).all())


def _sites(centers: FloatArray, origin: FloatArray, spacing: float) -> Int32Array | None:
    """Return the whole-number site of each cell, block by block, or None if one is off."""
    site = np.empty(centers.shape, np.int32)
    if (centers.max(axis=0) - origin).max() / spacing > np.iinfo(np.int32).max / 2:
        return None
    for start in range(0, len(centers), 1 << 18):
        block = centers[start : start + (1 << 18)]
        if not _lies_on_sites(block, origin, spacing):
            return None
        site[start : start + len(block)] = np.rint((block - origin) / spacing)
    return site


def _has_own_sites(site: Int32Array) -> bool:
    """Tell whether no two cells share a site."""
    shape = tuple(int(n) for n in site.max(axis=0) + 1)
    if float(np.prod(np.array(shape, float))) > _MOST_EMPTY_SITES * max(len(site), 1024):
        return False
    taken = np.zeros(shape, np.bool_)
    taken[tuple(site.T)] = True
    return int(np.count_nonzero(taken)) == len(site)


def _fills_box(sides: tuple[int, ...], graph: CellGraph) -> bool:
    """Tell whether every site of the box is taken and every inner face joined."""
    n = graph.n_cells
    if int(np.prod(np.array(sides, np.int64))) != n:
        return False
    return len(graph.indices) == 2 * sum(n - n // side for side in sides)
