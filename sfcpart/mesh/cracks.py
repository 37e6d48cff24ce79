"""Cracks: faces that would meet if points that coincide were one point.

Only cells with a face that no other cell shares are looked at: inside a sound mesh there is
nothing to find. Cost: a sort of their points and a match of their faces.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from sfcpart.dtypes import BoolArray, Int32Array, Int64Array
from sfcpart.mesh import build
from sfcpart.mesh.gate import frozen
from sfcpart.mesh.merge import coincident_points
from sfcpart.mesh.mesh import Mesh

__all__ = ["Cracks", "find_cracks"]


@dataclass(frozen=True)
class Cracks:
    """Points that coincide on the boundary of a mesh, and what they keep apart.

    Attributes
    ----------
    tolerance : float
        Largest distance of two points that coincide.
    n_points : int
        Points on boundary cells that are not the only ones where they are.
    n_faces : int
        Faces between two cells that appear once those points are merged.
    """

    tolerance: float
    n_points: int
    n_faces: int


def find_cracks(mesh: Mesh, boundary_count: Int32Array, tolerance: float) -> Cracks:
    """Look for cracks along the boundary.

    Parameters
    ----------
    mesh : Mesh
        With points.
    boundary_count : (n_cells,) int32
        Faces of each cell that no other cell shares, as in the cell graph.
    tolerance : float

    Returns
    -------
    Cracks

    Examples
    --------
    >>> points = [[0, 0], [1, 0], [0, 1], [1, 0], [1, 1], [0, 1]]
    >>> mesh = Mesh.from_arrays(points, {"triangle": [[0, 1, 2], [3, 4, 5]]})
    >>> find_cracks(mesh, np.array([3, 3]), 1e-9)
    Cracks(tolerance=1e-09, n_points=4, n_faces=1)
    """
    assert mesh.points is not None
    rim = _points_of(mesh, boundary_count > 0)
    lowest = coincident_points(mesh.points[rim], tolerance)
    shared = np.bincount(lowest, minlength=len(rim)) > 1
    n_points = int(np.count_nonzero(shared[lowest]))
    if not n_points:
        return Cracks(tolerance, 0, 0)
    number = np.arange(mesh.n_points, dtype=mesh.indices.dtype)
    number[rim] = rim[lowest]
    return Cracks(tolerance, n_points, _count_new_faces(mesh, boundary_count > 0, number))


def _points_of(mesh: Mesh, chosen: BoolArray) -> Int64Array:
    """List the points of the chosen cells."""
    used = np.zeros(mesh.n_points, np.bool_)
    used[build.take_rows(mesh.indptr, mesh.indices, chosen)[1]] = True
    return np.flatnonzero(used)


def _count_new_faces(mesh: Mesh, chosen: BoolArray, number: Int64Array) -> int:
    """Count the faces that the chosen cells share more of with their points renumbered."""
    from sfcpart.mesh.adjacency import join_cells

    indptr, indices = build.take_rows(mesh.indptr, mesh.indices, chosen)
    faces = build.cut_polyhedra(mesh.polyhedra, chosen)
    kind = frozen(mesh.kind[chosen])
    before = Mesh(mesh.points, kind, indptr, indices, polyhedra=faces)
    if faces is not None:
        flat = frozen(np.asarray(number[faces.face_indices]))
        faces = replace(faces, face_indices=flat)
    after = replace(before, indices=frozen(number[indices]), polyhedra=faces)
    return (len(join_cells(after)[1]) - len(join_cells(before)[1])) // 2
