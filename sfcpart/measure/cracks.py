"""Cracks: faces that would meet if points that coincide were one point; over ranks.

Only cells with a face that no other cell shares are looked at: inside a sound mesh there is
nothing to find. Their points are dealt out by stretches of a slanted axis, so that points that
coincide meet on a rank; the cells at such points are brought to rank 0, which matches their faces.
Cost: a sort of the points of these cells; 32 bytes a point. Cells at cracks are few, but rank 0
holds them all.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import FloatArray, Int32Array, Int64Array
from sfcpart.measure.check import held_of
from sfcpart.mesh.gate import frozen
from sfcpart.mesh.merge import SLANT, check_tolerance, close_pairs
from sfcpart.mesh.mesh import Mesh, Polyhedra
from sfcpart.slices.linking import lowest_of_pairs
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import (
    block_bounds,
    compact,
    dealing,
    gather_rows,
    owner_of,
    take_ragged,
)

__all__ = ["Cracks", "find_cracks"]

_STRETCHES = 64  # a rank, of the slanted axis


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


def find_cracks(mesh: Mesh | MeshSlice, boundary_count: Int32Array, tolerance: float) -> Cracks:
    """Look for cracks along the boundary.

    Parameters
    ----------
    mesh : Mesh or MeshSlice
        With points; all ranks call together.
    boundary_count : (n_local,) int32
        Faces of each cell that no other cell shares, as in the cell graph.
    tolerance : float

    Returns
    -------
    Cracks

    Raises
    ------
    MeshError
        If the tolerance is negative or not finite.

    Examples
    --------
    >>> points = [[0, 0], [1, 0], [0, 1], [1, 0], [1, 1], [0, 1]]
    >>> mesh = Mesh.from_arrays(points, {"triangle": [[0, 1, 2], [3, 4, 5]]})
    >>> find_cracks(mesh, np.array([3, 3]), 1e-9)
    Cracks(tolerance=1e-09, n_points=4, n_faces=1)
    """
    check_tolerance(tolerance)
    held = held_of(mesh)
    comm, chosen = held.comm, np.flatnonzero(boundary_count > 0)
    rim = np.unique(take_ragged(held.mesh.indptr, held.mesh.indices, chosen)[1])
    gid = np.asarray(held.global_points(rim), np.int64)
    assert held.mesh.points is not None
    pairs = _coincident(gid, held.mesh.points[rim], tolerance, comm)
    first = block_bounds(held.n_points, comm.size)
    known, lowest = lowest_of_pairs(pairs, first=first, comm=comm)
    n_points = int(comm.allreduce(np.array([len(known)], np.int64))[0])
    if not n_points:
        return Cracks(tolerance, 0, 0)
    number = np.full(held.mesh.n_points, -1, np.int64)
    number[rim] = _asked(gid, known, lowest, first, comm)
    return Cracks(tolerance, n_points, _count_new_faces(held, chosen, number))


def _coincident(gid: Int64Array, points: FloatArray, tolerance: float, comm: Comm) -> Int64Array:
    """Return pairs of points of all ranks within the tolerance, each on some rank."""
    along = points @ SLANT[: points.shape[1]]
    size = np.abs(points).max(initial=0.0)
    ends = [along.max(initial=-np.inf), -along.min(initial=np.inf), size]
    high, below_low, size = comm.allreduce(np.array(ends), "max").tolist()
    reach = 2 * (tolerance + 16 * np.finfo(np.float64).eps * size)
    width = max(2 * reach, (high + below_low) / (_STRETCHES * comm.size))
    place = (along + below_low) / width if width > 0 else np.zeros(len(along))
    stretch = np.floor(np.nan_to_num(place)).astype(np.int64)
    # points near the upper end of a stretch also meet those of the next
    again = np.flatnonzero(place - stretch > 1 - reach / width) if width > 0 else stretch[:0]
    row = np.concatenate([np.arange(len(gid)), again])
    way = dealing(comm, np.concatenate([stretch, stretch[again] + 1]) % comm.size)
    came, known = np.unique(way.forward(gid[row]), return_index=True)
    pairs = close_pairs(way.forward(points[row])[known], tolerance)
    return came[pairs]


def _asked(
    gid: Int64Array, known: Int64Array, lowest: Int64Array, first: Int64Array, comm: Comm
) -> Int64Array:
    """Return the lowest point each coincides with, -1 for points that are alone."""
    way = dealing(comm, owner_of(gid, first))
    asked = way.forward(gid)
    at = np.searchsorted(known, asked)
    found = np.full(len(asked), -1, np.int64)
    hit = at < len(known)
    hit[hit] = known[at[hit]] == asked[hit]
    found[hit] = lowest[at[hit]]
    return way.back(found)


def _count_new_faces(held: MeshSlice, chosen: Int64Array, number: Int64Array) -> int:
    """Count the faces that cells share more of once points have their numbers (-1: the same)."""
    mesh = held.mesh
    indptr, indices = take_ragged(mesh.indptr, mesh.indices, chosen)
    at_crack = np.add.reduceat(number[indices] >= 0, indptr[:-1]) > 0 if len(chosen) else chosen
    cells = chosen[np.flatnonzero(at_crack)]
    own = np.asarray(held.global_points(np.arange(mesh.n_points)), np.int64)
    rows = _Rows.of(mesh, cells, held.comm)
    counts = [
        rows.joined(
            gather_rows(held.comm, table[rows.points]),
            gather_rows(held.comm, table[rows.face_points]),
            held,
        )
        for table in (own, np.where(number >= 0, number, own))
    ]
    return int(held.comm.bcast(np.array([(counts[1] - counts[0]) // 2], np.int64))[0])


@dataclass(frozen=True, eq=False)
class _Rows:
    """Cells on rank 0 but for their points, of which each rank has the local numbers of its own."""

    kind: Int64Array
    size: Int64Array
    face_count: Int64Array
    face_size: Int64Array
    points: Int64Array
    face_points: Int64Array

    @classmethod
    def of(cls, mesh: Mesh, cells: Int64Array, comm: Comm) -> _Rows:
        """Gather kinds and sizes (collective)."""
        indptr, points = take_ragged(mesh.indptr, mesh.indices, cells)
        count, face_size, face_points = np.zeros((3, 0), np.int64)
        if mesh.polyhedra is not None:
            solid = mesh.polyhedra
            cell_ptr, face = take_ragged(solid.cell_indptr, solid.cell_indices, cells)
            face_ptr, face_points = take_ragged(solid.face_indptr, solid.face_indices, face)
            count, face_size = np.diff(cell_ptr), np.diff(face_ptr)
        sizes = [mesh.kind[cells].astype(np.int64), np.diff(indptr), count, face_size]
        kind, size, face_count, face_size = (gather_rows(comm, each) for each in sizes)
        return cls(kind, size, face_count, face_size, points, face_points)

    def joined(self, points: Int64Array, face_points: Int64Array, held: MeshSlice) -> int:
        """Count the entries of the cell graph of these cells, on rank 0; 0 elsewhere."""
        from sfcpart.mesh.adjacency import join_cells

        if held.comm.rank:
            return 0
        used, all_points = compact(np.concatenate([points, face_points]))
        offset = [
            frozen(np.concatenate(([0], np.cumsum(size))))
            for size in (self.size, self.face_count, self.face_size)
        ]
        corners, on_faces = (frozen(part) for part in np.split(all_points, [len(points)]))
        solid = None
        if len(self.face_count):
            each = frozen(np.arange(len(self.face_size), dtype=all_points.dtype))
            solid = Polyhedra(offset[2], on_faces, offset[1], each)
        assert held.mesh.points is not None
        nowhere = np.zeros((len(used), held.mesh.points.shape[1]))  # measures do not matter
        kind = frozen(self.kind.astype(np.uint8))
        mesh = Mesh(frozen(nowhere), kind, offset[0], corners, polyhedra=solid)
        mesh.keep("dim", lambda: held.mesh.dim)
        return len(join_cells(mesh)[1])
