"""Recognise a uniform lattice of squares or cubes, on which exact bounds on the cut are known.

Everything is checked, nothing assumed: cell types, equal measures, one cell a site, every joined
pair one step apart along one axis, every cell with as many faces as a square or cube. Parts of the
lattice may be missing. Cost: linear; a mesh of other cells is refused at once. Over ranks about
ten small reductions, and for a lattice 8 bytes a cell to the rank that counts its site.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.kernels.measure import count_off_lattice
from sfcpart.kernels.threads import run_ranges
from sfcpart.measure.gate import frozen
from sfcpart.measure.shape import extent_of
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.routing import block_bounds, dealing, owner_of

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


def find_lattice(centers: FloatArray, measures: FloatArray, graph: GraphSlice) -> Lattice | None:
    """Return the lattice that the cells of all ranks form, or None (collective).

    Parameters
    ----------
    centers : (n_local, dim) float64
        Cell centres, without the constant axis of a planar mesh.
    measures : (n_local,) float64
    graph : GraphSlice
    """
    comm, dim = graph.comm, centers.shape[1]
    has_first = graph.n_local > 0 and graph.first_gid == 0
    first = measures[:1] if has_first else np.zeros(1)
    size = float(comm.allreduce(first, "max")[0])
    spacing = size ** (1 / dim)
    if not 0 < spacing < np.inf or not _is_regular(measures, graph, size=size, dim=dim):
        return None
    low, high = extent_of(centers, comm)
    n_sites = np.rint((high - low) / spacing) + 1
    if n_sites.prod() > _MOST_SITES * max(graph.n_cells, _SAMPLE):
        return None
    sides = n_sites.astype(np.int64)
    if not _fits(centers, graph, low, spacing=spacing, sides=sides):
        return None
    long_sides = tuple(int(side) for side in sides if side > 1) or (1,)
    # Both faces of a cell across an axis of one cell are on the boundary.
    n_boundary = int(comm.allreduce(np.array([graph.boundary_count.sum()], np.int64))[0])
    boundary = n_boundary - 2 * graph.n_cells * (dim - len(long_sides))
    is_full = _fills_box(sides, graph)
    face_measure = spacing ** (dim - 1)
    return Lattice(len(long_sides), face_measure, boundary, long_sides if is_full else None)


def _is_regular(measures: FloatArray, graph: GraphSlice, *, size: float, dim: int) -> bool:
    """Tell whether all cells have one measure and the 2 dim faces of a square or cube."""
    allowed = _TOLERANCE * size
    sample = np.abs(measures[:_SAMPLE] - size).max(initial=0.0)
    if not _everywhere(bool(sample <= allowed), graph.comm):
        return False
    apart = max(measures.max(initial=size) - size, size - measures.min(initial=size))
    n_faces = np.diff(graph.indptr) + graph.boundary_count
    return _everywhere(bool(apart <= allowed and (n_faces == 2 * dim).all()), graph.comm)


def _everywhere(is_so: bool, comm: Comm) -> bool:
    """Tell whether it is so on all ranks (collective)."""
    return bool(comm.allreduce(np.array([is_so]), "min")[0])


def _fits(
    centers: FloatArray, graph: GraphSlice, origin: FloatArray, *, spacing: float, sides: Int64Array
) -> bool:
    """Tell whether cells lie on sites of their own, joined only one step apart."""
    site = np.empty(graph.n_local, np.int64)
    n_bad = run_ranges(
        count_off_lattice,
        graph.n_local,
        frozen(graph.indptr),
        frozen(graph.indices),
        frozen(graph.extend(centers)),
        origin,
        spacing,
        _TOLERANCE,
        sides,
        site,
    )
    if not _everywhere(sum(n_bad) == 0, graph.comm):
        return False
    first = block_bounds(int(sides.prod()), graph.comm.size)
    came = dealing(graph.comm, owner_of(site, first)).forward(site) - first[graph.comm.rank]
    is_taken = np.zeros(int(first[graph.comm.rank + 1] - first[graph.comm.rank]), np.bool_)
    is_taken[came] = True
    n_taken = np.array([np.count_nonzero(is_taken)], np.int64)
    return int(graph.comm.allreduce(n_taken)[0]) == graph.n_cells


def _fills_box(sides: Int64Array, graph: GraphSlice) -> bool:
    """Tell whether every site of the box is taken and every inner face joined."""
    n = graph.n_cells
    n_entries = int(graph.comm.allreduce(np.array([len(graph.indices)], np.int64))[0])
    return int(sides.prod()) == n and n_entries == 2 * sum(n - n // int(side) for side in sides)
