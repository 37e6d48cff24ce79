"""The memory that a split of a mesh takes, estimated from its arrays or from counts alone."""

from __future__ import annotations

import numpy as np

from sfcpart.mesh.kinds import POLYGON, kind_tables
from sfcpart.mesh.mesh import Mesh

__all__ = ["memory_of_counts", "split_memory"]

_PROCESS = 200_000_000
"""Bytes of a process that has loaded everything and split a mesh of no size (measured: 190)."""


def split_memory(mesh: Mesh) -> int:
    """Estimate the peak memory of splitting, measuring and writing a mesh.

    Parameters
    ----------
    mesh : Mesh

    Returns
    -------
    int
        Bytes: the process itself, the mesh, and for each cell its centre and measure (8 bytes a
        number), 8 for part and weight, and the larger of 48 (keys and their order) and 28 with
        another 32 a face of it (the cell graph while it is made).

    Notes
    -----
    Measured with `sfcpart split --parts 64` of VTKHDF files of 0.3 and 2 million cells: 312 bytes
    a hexahedron where this formula says 325, 216 bytes a tetrahedron where it says 225.

    Examples
    --------
    >>> small = Mesh.from_centers([[0.0, 0.0]])
    >>> large = Mesh.from_centers([[0.0, 0.0]] * 1000)
    >>> split_memory(large) - split_memory(small)
    104895
    """
    held = [mesh.points, mesh.kind, mesh.indptr, mesh.indices, mesh.given_center]
    held += [mesh.given_measure, *mesh.cell_fields.values(), *mesh.point_fields.values()]
    if mesh.polyhedra is not None:
        faces = mesh.polyhedra
        held += [faces.face_indptr, faces.face_indices, faces.cell_indptr, faces.cell_indices]
    if mesh.faces is not None:
        held += [mesh.faces.cell, mesh.faces.measure]
    size = sum(array.nbytes for array in held if array is not None)
    return memory_of_counts(
        mesh.n_cells, n_faces=_count_cell_faces(mesh), held=size, dim=mesh.space_dim
    )


def memory_of_counts(n_cells: int, *, n_faces: int, held: int, dim: int = 3) -> int:
    """Estimate the same from counts.

    Parameters
    ----------
    n_cells : int
    n_faces : int
        Faces of all cells, shared ones from both sides; 0 for bare centres.
    held : int
        Bytes of the mesh's own arrays.
    dim : int
        Of the centres.

    Returns
    -------
    int
        Bytes.

    Examples
    --------
    >>> memory_of_counts(1000, n_faces=6000, held=80_000) - memory_of_counts(0, n_faces=0, held=0)
    340000
    """
    graph = 28 * n_cells + 32 * n_faces if n_faces else 0
    each = 8 * (dim + 1) + 8
    return _PROCESS + held + each * n_cells + max(48 * n_cells, graph)


def _count_cell_faces(mesh: Mesh) -> int:
    """Count the faces of all cells, shared ones from both sides."""
    if mesh.faces is not None:
        return 2 * len(mesh.faces.cell)
    count = kind_tables().face_count.astype(np.int64)
    total = int(np.bincount(mesh.kind, minlength=256) @ count)
    if mesh.polyhedra is not None:
        total += len(mesh.polyhedra.cell_indices)
    return total + int(np.diff(mesh.indptr)[mesh.kind == POLYGON].sum())
