"""Points that coincide within a tolerance: find them, and make one point of each group.

Points are sorted by their projection on a slanted line; two points within the tolerance of each
other lie within it on the line too, so that only near neighbours there are compared. Chains are
followed: a group may be longer than the tolerance. The lowest point of a group stays for all.
Cost: one sort of the points, O(n log n), and a few arrays of n numbers; where the tolerance is so
wide that many points share a stretch of the line, a k-d tree takes over.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np

from sfcpart.dtypes import OFFSET, BoolArray, FloatArray, Int64Array, IntArray
from sfcpart.errors import MeshError
from sfcpart.mesh.arrays import MeshArrays
from sfcpart.mesh.gate import frozen
from sfcpart.mesh.pieces import Polyhedra

__all__ = [
    "SLANT",
    "check_still_cells",
    "check_tolerance",
    "close_pairs",
    "coincident_points",
    "with_new_numbers",
]

SLANT = np.array([0.8506508, 0.4472136, 0.2763932])
_WIDEST = 32


def coincident_points(points: FloatArray, tolerance: float) -> Int64Array:
    """Find for each point the lowest point it coincides with.

    Parameters
    ----------
    points : (n, 2) or (n, 3) float64
    tolerance : float
        Largest distance of two points that coincide, >= 0.

    Returns
    -------
    lowest : (n,) int64
        `lowest[i] <= i`; equal to i where nothing lower coincides with point i.

    Raises
    ------
    MeshError
        If the tolerance is negative or not finite.

    Examples
    --------
    >>> coincident_points(np.array([[0.0, 0], [1, 0], [1e-9, 0], [0, 0]]), 1e-6).tolist()
    [0, 1, 0, 0]
    """
    check_tolerance(tolerance)
    lowest = np.arange(len(points), dtype=OFFSET)
    pairs = close_pairs(points, tolerance)
    if not len(pairs):
        return lowest
    from scipy.sparse import coo_array
    from scipy.sparse.csgraph import connected_components

    involved, ends = np.unique(pairs, return_inverse=True)
    ends = ends.reshape(-1, 2)
    n = len(involved)
    link = coo_array((np.ones(len(ends), np.int8), (ends[:, 0], ends[:, 1])), shape=(n, n))
    count, label = connected_components(link, directed=False)
    first = np.full(count, len(points), OFFSET)
    np.minimum.at(first, label, involved)
    lowest[involved] = first[label]
    return lowest


def check_tolerance(tolerance: float) -> None:
    """Refuse distances that are none."""
    if not (np.isfinite(tolerance) and tolerance >= 0):
        raise MeshError(f"the tolerance is {tolerance}; wanted a finite distance >= 0")


def close_pairs(points: FloatArray, tolerance: float) -> Int64Array:
    """List pairs of points within the tolerance, (n_pairs, 2)."""
    along = points @ SLANT[: points.shape[1]]
    order = np.argsort(along, kind="stable")
    along = along[order]
    # rounding of the projections must not hide a pair
    reach = tolerance + 8 * np.finfo(np.float64).eps * float(np.abs(points).max(initial=0.0))
    found = []
    for step in range(1, len(points)):
        near = np.flatnonzero(along[step:] - along[:-step] <= reach)
        if not len(near):
            break
        if step > _WIDEST:
            return _tree_pairs(points, tolerance)
        a, b = order[near], order[near + step]
        apart = points[a] - points[b]
        close = np.einsum("ij,ij->i", apart, apart) <= tolerance * tolerance
        found.append(np.column_stack([a[close], b[close]]))
    return np.concatenate(found) if found else np.empty((0, 2), OFFSET)


def _tree_pairs(points: FloatArray, tolerance: float) -> Int64Array:
    """List pairs with a k-d tree."""
    from scipy.spatial import cKDTree

    pairs: Int64Array = cKDTree(points).query_pairs(tolerance, output_type="ndarray")
    return pairs.astype(OFFSET, copy=False)


def check_still_cells(mesh: MeshArrays, lowest: Int64Array, tolerance: float) -> None:
    """Refuse a tolerance so wide that all points of a cell become one."""
    lost = _single(lowest[mesh.indices], mesh.indptr) & ~_single(mesh.indices, mesh.indptr)
    if lost.any():
        raise MeshError(
            f"a tolerance of {tolerance:g} makes cell {int(np.argmax(lost))} a single point; "
            "stay well below the shortest edge"
        )


def _single(indices: IntArray, indptr: Int64Array) -> BoolArray:
    """Tell which cells list one point only."""
    starts = indptr[:-1]
    single: BoolArray = np.minimum.reduceat(indices, starts) == np.maximum.reduceat(indices, starts)
    return single


def with_new_numbers(number: Int64Array, mesh: MeshArrays) -> dict[str, Any]:
    """Return what of a mesh lists points, with these numbers in place of theirs."""
    groups = (replace(group, indices=_renumber(number, group.indices)) for group in mesh.boundary)
    return {
        "indices": _renumber(number, mesh.indices),
        "polyhedra": None if mesh.polyhedra is None else _renumber_faces(number, mesh.polyhedra),
        "boundary": tuple(groups),
    }


def _renumber(number: Int64Array, indices: IntArray) -> IntArray:
    """Give points their new numbers, in the same dtype."""
    new: IntArray = frozen(number.astype(indices.dtype)[indices])
    return new


def _renumber_faces(number: Int64Array, faces: Polyhedra) -> Polyhedra:
    """Give the points of polyhedral faces their new numbers."""
    return replace(faces, face_indices=_renumber(number, faces.face_indices))
