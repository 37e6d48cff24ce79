"""What one rank holds of a mesh: consecutive cells in file order, and the points they use.

A whole mesh is a slice too, over one rank, so whatever works on slices is written once. A rank may
hold no cells. Ways to make one: `MeshSlice.whole`, `cut_mesh` (every rank has the whole mesh; for
tests), `scatter_mesh` (rank 0 has it), and the readers of files by slices.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.dtypes import GID, OFFSET, Array, Int64Array, IntArray
from sfcpart.errors import InputError
from sfcpart.mesh.gate import frozen
from sfcpart.mesh.mesh import BoundaryGroup, FaceList, Mesh, Polyhedra
from sfcpart.slices.routing import block_bounds, compact

__all__ = ["GroupRows", "MeshSlice", "assemble_slice", "cut_mesh", "scatter_mesh"]


@dataclass(frozen=True, eq=False)
class GroupRows:
    """The elements of one boundary group that a slice holds, beside `mesh.boundary`.

    An element lies with each of the (at most two) lowest cells of the mesh that hold all of its
    points; elements that no cell holds lie nowhere.

    Attributes
    ----------
    element_gid : (n,) int64
        Number of each element in the whole group, ascending.
    cell_gid : (n, 2) int64
        Those cells in ascending order, -1 where there is none.
    n_elements : int
        Of the whole group.
    """

    element_gid: Int64Array
    cell_gid: Int64Array
    n_elements: int


@dataclass(frozen=True, eq=False)
class MeshSlice:
    """Consecutive cells of a mesh on one rank of several.

    Attributes
    ----------
    mesh : Mesh
        Cells `first_gid` to `first_gid + n_local - 1`, with the points they use in ascending
        order of their global numbers; cells and points are numbered locally. It may have no
        cells; `dim` and `space_dim` are those of the whole mesh. If the mesh is given by faces,
        `mesh.faces` holds those of its cells in file order, with cells by *global* number.
    comm : Comm
    rank_first : (size + 1,) int64
        First cell of every rank, and the number of all cells.
    n_points : int
        Points of the whole mesh, also those that no cell uses.
    point_gid : (mesh.n_points,) int64 or None
        Global number of each local point, ascending; None: all, local and global are the same.
    groups : tuple of GroupRows, or None
        One for each of `mesh.boundary`; None for a whole mesh, which has them as they are.
    face_gid : (n_faces of mesh.polyhedra,) int64 or None
        Number of each face of the polyhedra in the whole mesh, ascending; None: all.

    Examples
    --------
    >>> mesh = Mesh.from_centers([[0.0, 0.5], [1.0, 0.5]])
    >>> whole = MeshSlice.whole(mesh)
    >>> whole.n_cells, whole.first_gid, whole.n_local
    (2, 0, 2)
    """

    mesh: Mesh
    comm: Comm
    rank_first: Int64Array
    n_points: int
    point_gid: Int64Array | None = None
    groups: tuple[GroupRows, ...] | None = None
    face_gid: Int64Array | None = None

    @classmethod
    def whole(cls, mesh: Mesh) -> MeshSlice:
        """Return a whole mesh as the slice of the only rank.

        Parameters
        ----------
        mesh : Mesh

        Examples
        --------
        >>> MeshSlice.whole(Mesh.from_centers([[0.0, 0.5]])).comm.size
        1
        """
        return cls(mesh, SerialComm(), np.array([0, mesh.n_cells], GID), mesh.n_points)

    @property
    def first_gid(self) -> int:
        """Global number of this rank's first cell."""
        return int(self.rank_first[self.comm.rank])

    @property
    def n_cells(self) -> int:
        """Number of cells of the whole mesh."""
        return int(self.rank_first[-1])

    @property
    def n_local(self) -> int:
        """Number of cells held here."""
        return self.mesh.n_cells

    @property
    def cell_gid(self) -> Int64Array:
        """Global number of each cell held here, (n_local,) int64."""
        return np.arange(self.first_gid, self.first_gid + self.n_local, dtype=GID)

    def anew(self) -> MeshSlice:
        """Return the slice without what has been derived from it, such as the cell graph."""
        mesh, old = replace(self.mesh), self.mesh
        mesh.keep("dim", lambda: old.dim)
        mesh.keep("space_dim", lambda: old.space_dim)
        return replace(self, mesh=mesh)

    def global_points(self, points: IntArray) -> IntArray:
        """Return the global numbers of local points."""
        return points if self.point_gid is None else self.point_gid[points]

    def with_cell_field(self, name: str, values: ArrayLike) -> MeshSlice:
        """Return the slice with a field of its cells added or replaced.

        Parameters
        ----------
        name : str
        values : (n_local, ...) array

        Examples
        --------
        >>> whole = MeshSlice.whole(Mesh.from_centers([[0.0, 0.5]]))
        >>> list(whole.with_cell_field("part", [0]).mesh.cell_fields)
        ['part']
        """
        return replace(self, mesh=self.mesh.with_cell_field(name, values))


def cut_mesh(mesh: Mesh, comm: Comm, *, rank_first: ArrayLike | None = None) -> MeshSlice:
    """Keep this rank's slice of a mesh that every rank holds.

    Parameters
    ----------
    mesh : Mesh
        The same on all ranks.
    comm : Comm
    rank_first : (size + 1,) integers, optional
        First cell of each rank, and the number of cells; even slices by default.

    Returns
    -------
    MeshSlice

    Raises
    ------
    InputError
        If `rank_first` does not rise from 0 to the number of cells.

    Notes
    -----
    O(whole mesh) memory on every rank: for tests and small meshes.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> mesh = Mesh.from_centers([[0.0, 0.5], [1.0, 0.5], [2.0, 0.5]])
    >>> run_ranks(2, lambda comm: cut_mesh(mesh, comm).cell_gid.tolist())
    [[0], [1, 2]]
    """
    first = _checked_bounds(rank_first, mesh.n_cells, comm.size)
    return assemble_slice(_packed(mesh, first, comm.rank), _about(mesh), first, comm)


def scatter_mesh(
    mesh: Mesh | None, comm: Comm, *, rank_first: ArrayLike | None = None
) -> MeshSlice:
    """Spread a mesh that rank 0 holds (collective).

    Parameters
    ----------
    mesh : Mesh or None
        On rank 0; the others' is not looked at.
    comm : Comm
    rank_first : (size + 1,) integers, optional
        As for `cut_mesh`, on rank 0.

    Returns
    -------
    MeshSlice
        On rank 0 alone (one rank) the mesh itself.

    Raises
    ------
    InputError
        If there is no mesh on rank 0, or `rank_first` is malformed.

    Notes
    -----
    The slices are made and sent one after the other; rank 0 holds one beside the mesh.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> mesh = Mesh.from_centers([[0.0, 0.5], [1.0, 0.5], [2.0, 0.5]])
    >>> run_ranks(2, lambda comm: scatter_mesh(None if comm.rank else mesh, comm).n_local)
    [1, 2]
    """
    error, about, first = None, None, np.zeros(0, GID)
    if comm.rank == 0:
        try:
            if mesh is None:
                raise InputError("rank 0 has no mesh to spread; wanted it there")
            first, about = _checked_bounds(rank_first, mesh.n_cells, comm.size), _about(mesh)
        except InputError as caught:
            error = caught
    comm.check(error)
    about, first = comm.bcast_object(about), comm.bcast(first)
    mine: dict[str, Array] = {}
    for rank in range(comm.size):
        packed = _packed(mesh, first, rank) if comm.rank == 0 and mesh is not None else {}
        for name in comm.bcast_object(list(packed)):
            came = _sent_from_root(packed.get(name), rank, comm)
            if comm.rank == rank:
                mine[name] = came
    return assemble_slice(mine, about, first, comm)


def _sent_from_root(array: Array | None, rank: int, comm: Comm) -> Array:
    """Send an array of rank 0 to one rank; the others get none of its rows."""
    form = comm.bcast_object(None if array is None else (array.dtype, array.shape[1:]))
    none = np.empty((0, *form[1]), form[0])
    rows = [none] * comm.size
    if array is not None:
        rows[rank] = array
    return comm.alltoall(rows)[0]


def _checked_bounds(rank_first: ArrayLike | None, n_cells: int, size: int) -> Int64Array:
    """Return the first cell of each rank."""
    if rank_first is None:
        return block_bounds(n_cells, size)
    first = np.asarray(rank_first)
    if first.shape != (size + 1,) or first[0] != 0 or first[-1] != n_cells:
        raise InputError(
            f"rank_first is {first.tolist()}; wanted {size + 1} numbers from 0 to {n_cells}"
        )
    if np.any(first[1:] < first[:-1]):
        raise InputError(f"rank_first is {first.tolist()}; wanted numbers that never fall")
    return first.astype(GID)


def _about(mesh: Mesh) -> dict[str, Any]:
    """Return what all ranks must know of the whole mesh (small)."""
    return {
        "n_points": mesh.n_points,
        "dim": mesh.dim,
        "space_dim": mesh.space_dim,
        "groups": [(group.name, group.tag, len(group.kind)) for group in mesh.boundary],
    }


def _packed(mesh: Mesh, first: Int64Array, rank: int) -> dict[str, Array]:
    """Return the arrays of one rank's slice, by name."""
    lo, hi = int(first[rank]), int(first[rank + 1])
    packed: dict[str, Array] = {"kind": mesh.kind[lo:hi]}
    if mesh.points is not None:
        _pack_points(mesh, lo, hi, packed)
    if mesh.given_center is not None:
        packed["given_center"] = mesh.given_center[lo:hi]
    if mesh.given_measure is not None:
        packed["given_measure"] = mesh.given_measure[lo:hi]
    if mesh.faces is not None:
        inside = ((mesh.faces.cell >= lo) & (mesh.faces.cell < hi)).any(axis=1)
        packed["face_cell"] = mesh.faces.cell[inside].astype(GID)
        packed["face_measure"] = mesh.faces.measure[inside]
    packed.update({f"cell:{name}": field[lo:hi] for name, field in mesh.cell_fields.items()})
    return packed


def _pack_points(mesh: Mesh, lo: int, hi: int, packed: dict[str, Array]) -> None:
    """Add the points that cells use, and everything that names points."""
    from sfcpart.slices.elements import elements_of_cells

    assert mesh.points is not None
    entries, indptr = _rows_of(mesh.indptr, mesh.indices, lo, hi)
    faces = mesh.polyhedra
    face_points = np.empty(0, entries.dtype)
    if faces is not None:
        rows, packed["poly_cell_indptr"] = _rows_of(faces.cell_indptr, faces.cell_indices, lo, hi)
        used, packed["poly_cell_indices"] = compact(rows)
        packed["poly_face_gid"] = used
        size = np.diff(faces.face_indptr)[used]
        packed["poly_face_indptr"] = np.concatenate(([0], np.cumsum(size))).astype(OFFSET)
        within = np.arange(int(size.sum())) - np.repeat(packed["poly_face_indptr"][:-1], size)
        face_points = faces.face_indices[np.repeat(faces.face_indptr[used], size) + within]
    point_gid, number = compact(np.concatenate([entries, face_points]))
    packed["indptr"], packed["indices"] = indptr, number[: len(entries)]
    if faces is not None:
        packed["poly_face_indices"] = number[len(entries) :]
    packed["point_gid"], packed["points"] = point_gid, mesh.points[point_gid]
    packed.update({f"point:{name}": field[point_gid] for name, field in mesh.point_fields.items()})
    for k, rows_held in enumerate(elements_of_cells(mesh, lo, hi, point_gid=point_gid)):
        packed.update({f"group:{k}:{name}": array for name, array in rows_held.items()})


def _rows_of(
    indptr: Int64Array, indices: IntArray, lo: int, hi: int
) -> tuple[IntArray, Int64Array]:
    """Return the entries of rows `lo` to `hi - 1` of a CSR relation and their offsets from 0."""
    return indices[indptr[lo] : indptr[hi]], indptr[lo : hi + 1] - indptr[lo]


def assemble_slice(
    packed: dict[str, Array], about: dict[str, Any], first: Int64Array, comm: Comm
) -> MeshSlice:
    """Make a slice of its arrays, checked by who made them.

    Parameters
    ----------
    packed : dict of str to array
        "kind", "indptr", "indices", "points", "point_gid", "given_center", "given_measure",
        "face_cell" and "face_measure", "poly_face_gid", "poly_face_indptr" and the other three of
        `Polyhedra`, "cell:NAME" and "point:NAME" for fields, and for the k-th boundary group
        "group:k:kind", ":indptr", ":indices", ":element_gid" and ":cell_gid"; what does not occur
        is left out, on all ranks alike.
    about : dict
        "n_points", "dim", "space_dim" of the whole mesh, and "groups": name, tag and number of
        elements of each.
    first : (size + 1,) int64
        First cell of every rank.
    comm : Comm

    Returns
    -------
    MeshSlice
    """
    held = {name: frozen(array) for name, array in packed.items()}
    point_gid = held.get("point_gid")
    none = np.zeros(len(held["kind"]) + 1, OFFSET)
    groups = tuple(_group(held, k, *what) for k, what in enumerate(about["groups"]))
    mesh = Mesh(
        points=held.get("points"),
        kind=held["kind"],
        indptr=held.get("indptr", frozen(none)),
        indices=held.get("indices", frozen(np.empty(0, np.int32))),
        polyhedra=_polyhedra(held),
        faces=FaceList(held["face_cell"], held["face_measure"]) if "face_cell" in held else None,
        given_center=held.get("given_center"),
        given_measure=held.get("given_measure"),
        cell_fields=_fields(held, "cell:"),
        point_fields=_fields(held, "point:"),
        boundary=tuple(group for group, _ in groups),
    )
    mesh.keep("dim", lambda: about["dim"])
    mesh.keep("space_dim", lambda: about["space_dim"])
    rows = tuple(rows for _, rows in groups)
    face_gid = held.get("poly_face_gid")
    return MeshSlice(mesh, comm, first, about["n_points"], point_gid, rows, face_gid)


def _fields(held: Mapping[str, Array], prefix: str) -> Mapping[str, Array]:
    """Return the fields whose names begin with a prefix."""
    return MappingProxyType(
        {name[len(prefix) :]: array for name, array in held.items() if name.startswith(prefix)}
    )


def _polyhedra(held: Mapping[str, Array]) -> Polyhedra | None:
    """Return the faces of the polyhedra."""
    names = ("face_indptr", "face_indices", "cell_indptr", "cell_indices")
    if "poly_cell_indptr" not in held:
        return None
    return Polyhedra(*(held[f"poly_{name}"] for name in names))


def _group(
    held: Mapping[str, Array], k: int, name: str, tag: int, n_elements: int
) -> tuple[BoundaryGroup, GroupRows]:
    """Return the k-th boundary group as far as it is held here."""
    kind, indptr, indices, element_gid, cell_gid = (
        held[f"group:{k}:{what}"]
        for what in ("kind", "indptr", "indices", "element_gid", "cell_gid")
    )
    return (
        BoundaryGroup(name, tag, kind, indptr, indices),
        GroupRows(element_gid, cell_gid, n_elements),
    )
