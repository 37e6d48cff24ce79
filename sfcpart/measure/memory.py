"""The memory that a split of a mesh takes, estimated from its arrays or from counts alone."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array, index_dtype
from sfcpart.mesh.kinds import POLYGON, kind_tables
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["memory_of_counts", "split_memory"]

_PROCESS = 200_000_000
"""Bytes of a process that has loaded everything and split a mesh of no size (measured: 190)."""


def split_memory(mesh: Mesh | MeshSlice) -> int:
    """Estimate the peak memory of splitting, measuring and writing a mesh on one rank.

    Parameters
    ----------
    mesh : Mesh or MeshSlice
        The whole mesh is meant; all ranks that hold slices of it call together.

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
    held = mesh if isinstance(mesh, MeshSlice) else MeshSlice.whole(mesh)
    n_bytes, n_faces = held.comm.allreduce(np.array(_counts(held), np.int64)).tolist()
    of_points = [held.mesh.points, *held.mesh.point_fields.values()]
    n_bytes += held.n_points * sum(_row(array) for array in of_points if array is not None)
    shape = {"n_faces": n_faces, "dim": held.mesh.space_dim}
    return memory_of_counts(held.n_cells, held=n_bytes + 8, **shape)


def _counts(held: MeshSlice) -> tuple[int, int]:
    """Return the bytes that this rank's cells take, and their faces."""
    mesh, n = held.mesh, held.n_local
    arrays = [mesh.kind, mesh.given_center, mesh.given_measure, *mesh.cell_fields.values()]
    number = np.dtype(index_dtype(held.n_points)).itemsize
    size = 8 * n + number * len(mesh.indices)
    size += sum(_row(array) * n for array in arrays if array is not None)
    if mesh.polyhedra is not None:
        faces = mesh.polyhedra
        corners = int(np.diff(faces.face_indptr)[faces.cell_indices].sum())
        size += 8 * n + (8 + number) * len(faces.cell_indices) + number * corners
    if mesh.faces is not None:
        first = mesh.faces.cell[:, 0]
        n_own = int(np.count_nonzero((first >= held.first_gid) & (first < held.first_gid + n)))
        return size + 24 * n_own, 2 * n_own
    return size, _count_cell_faces(mesh)


def _row(array: Array) -> int:
    """Return the bytes of a row."""
    return int(array.dtype.itemsize * np.prod(array.shape[1:]))


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
    count = kind_tables().face_count.astype(np.int64)
    total = int(np.bincount(mesh.kind, minlength=256) @ count)
    if mesh.polyhedra is not None:
        total += len(mesh.polyhedra.cell_indices)
    return total + int(np.diff(mesh.indptr)[mesh.kind == POLYGON].sum())
