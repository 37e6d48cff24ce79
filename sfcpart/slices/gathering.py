"""A mesh that lies on many ranks, brought to rank 0: for what only a whole mesh will do.

That is a limit: the mesh must fit the memory of rank 0. Points that no cell uses are left out,
since no rank holds them, and so are point fields and boundary groups, which nobody asks for there.
"""

from __future__ import annotations

from types import MappingProxyType
from typing import Any

import numpy as np

from sfcpart.dtypes import GID, OFFSET, Array, Int64Array
from sfcpart.mesh.gate import frozen
from sfcpart.mesh.mesh import FaceList, Mesh, Polyhedra
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import compact, gather_rows, take_ragged

__all__ = ["gather_mesh"]


def gather_mesh(held: MeshSlice) -> Mesh | None:
    """Return the whole mesh on rank 0, None on the others (collective).

    Parameters
    ----------
    held : MeshSlice
        A whole mesh is returned as it is.

    Notes
    -----
    O(whole mesh) time and memory on rank 0.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.slices.mesh_slice import cut_mesh
    >>> mesh = Mesh.from_centers([[0.0, 0.5], [1.0, 0.5], [2.0, 0.5]])
    >>> run_ranks(2, lambda comm: gather_mesh(cut_mesh(mesh, comm)))[0].n_cells
    3
    """
    if held.groups is None:
        return held.mesh
    comm, mesh = held.comm, held.mesh
    fields = {name: gather_rows(comm, rows) for name, rows in mesh.cell_fields.items()}
    arrays: dict[str, Any] = {"kind": gather_rows(comm, mesh.kind)}
    for name in ("given_center", "given_measure"):
        rows = getattr(mesh, name)
        arrays[name] = None if rows is None else gather_rows(comm, rows)
    arrays |= _points(held) if mesh.points is not None else _no_points(len(arrays["kind"]))
    faces = _faces(held)
    if comm.rank:
        return None
    ready: dict[str, Any] = {
        name: frozen(value) if isinstance(value, np.ndarray) else value
        for name, value in arrays.items()
    }
    whole = Mesh(
        **ready,
        faces=faces,
        cell_fields=MappingProxyType({name: frozen(rows) for name, rows in fields.items()}),
    )
    whole.keep("dim", lambda: mesh.dim)
    whole.keep("space_dim", lambda: mesh.space_dim)
    return whole


def _no_points(n_cells: int) -> dict[str, Any]:
    """Return the arrays of cells that have no points."""
    none = np.empty(0, np.int32)
    return {"points": None, "indptr": np.zeros(n_cells + 1, OFFSET), "indices": none}


def _points(held: MeshSlice) -> dict[str, Any]:
    """Gather points, each once, and everything that names them."""
    comm, mesh, solid = held.comm, held.mesh, held.mesh.polyhedra
    assert held.point_gid is not None
    gid = gather_rows(comm, held.point_gid)
    positions = gather_rows(comm, mesh.points if mesh.points is not None else np.empty((0, 3)))
    gid, first = np.unique(gid, return_index=True)
    found: dict[str, Any] = {
        "points": positions[first],
        "indptr": _offsets(held, mesh.indptr),
        "indices": _among(gid, gather_rows(comm, held.point_gid[mesh.indices])),
    }
    if solid is None or held.face_gid is None:
        return found
    rows = gather_rows(comm, held.face_gid[solid.cell_indices])
    face_gid = gather_rows(comm, held.face_gid)
    indptr = _offsets(held, solid.face_indptr)
    ids = _among(gid, gather_rows(comm, held.point_gid[solid.face_indices]))
    face_gid, first = np.unique(face_gid, return_index=True)
    face_indptr, face_indices = take_ragged(indptr, ids, first)
    cell_indptr = _offsets(held, solid.cell_indptr)
    faces = (face_indptr, face_indices, cell_indptr, _among(face_gid, rows))
    found["polyhedra"] = Polyhedra(*map(frozen, faces))
    return found


def _among(known: Int64Array, numbers: Array) -> Array:
    """Return the place of each number among known ones (each of which occurs)."""
    used, place = compact(numbers)
    return place if len(used) == len(known) else np.searchsorted(known, used)[place]


def _offsets(held: MeshSlice, indptr: Int64Array) -> Int64Array:
    """Gather the sizes of rows and return offsets."""
    size = gather_rows(held.comm, np.diff(indptr))
    return np.concatenate(([0], np.cumsum(size))).astype(OFFSET)


def _faces(held: MeshSlice) -> FaceList | None:
    """Gather the faces of a mesh given by faces, each from the rank of its first cell."""
    faces = held.mesh.faces
    if faces is None:
        return None
    lo, hi = held.first_gid, held.first_gid + held.n_local
    lowest = np.where(faces.cell[:, 1] < 0, faces.cell[:, 0], faces.cell.min(axis=1))
    mine = (lowest >= lo) & (lowest < hi)
    cell = gather_rows(held.comm, faces.cell[mine].astype(GID))
    return FaceList(frozen(cell), frozen(gather_rows(held.comm, faces.measure[mine])))
