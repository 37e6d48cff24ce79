"""Read a VTKHDF grid by slices: each rank its share of the cells, and the points they use.

How: rank r of P reads the r-th of P even stretches of the file's cells, and the r-th of P even
stretches of its points; points are then asked for, by number, from the ranks that read them. What
`read_vtkhdf` and `build_mesh` do to a whole file is done here to slices, with the same outcome:
ghosts are dropped, points of several partitions are joined by their global ids, elements of lower
dimension become boundary groups and go to the ranks that hold their cells.
Cost: the file is read once, by all ranks together; memory is a P-th of what one rank would take.

Source: VTK file formats, "VTKHDF" (https://docs.vtk.org), versions 1.0 to 2.6.
"""

from __future__ import annotations

from contextlib import ExitStack
from dataclasses import dataclass, replace
from os import PathLike

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import GID, Array, BoolArray, Int64Array, IntArray
from sfcpart.errors import MeshError
from sfcpart.files.hdf5 import read_hdf5
from sfcpart.files.meshes.assemble import as_numbers, cell_dimension, tag_label
from sfcpart.files.meshes.raw import select_rows
from sfcpart.files.meshes.vtkhdf_extent import grid_of
from sfcpart.files.meshes.vtkhdf_points import FilePoints, read_points
from sfcpart.files.meshes.vtkhdf_rows import GridRows
from sfcpart.mesh.build import check_polyhedra
from sfcpart.mesh.gate import check_kinds
from sfcpart.mesh.kinds import POLYHEDRON, kind_tables
from sfcpart.mesh.mesh import Polyhedra
from sfcpart.slices.elements import Elements, attach_elements
from sfcpart.slices.gate import agreed
from sfcpart.slices.mesh_slice import MeshSlice, assemble_slice
from sfcpart.slices.routing import ask_ragged, ask_rows, block_bounds, compact, take_ragged

__all__ = ["read_vtkhdf_slice"]


@dataclass(frozen=True, eq=False)
class _Elements:
    """Consecutive elements of the file, ghosts left out; points by number in the file."""

    kind: Array
    indptr: Int64Array
    indices: IntArray
    fields: dict[str, Array]
    face_indptr: Int64Array | None = None
    faces: IntArray | None = None

    def taken(self, keep: BoolArray) -> _Elements:
        """Return some of the elements."""
        indptr, indices = select_rows(self.indptr, self.indices, keep)
        fields = {name: values[keep] for name, values in self.fields.items()}
        some = _Elements(self.kind[keep], indptr, indices, fields)
        if self.face_indptr is None or self.faces is None:
            return some
        face_indptr, faces = select_rows(self.face_indptr, self.faces, keep)
        return replace(some, face_indptr=face_indptr, faces=faces)


def read_vtkhdf_slice(path: str | PathLike[str], comm: Comm) -> MeshSlice:
    """Read this rank's slice of an unstructured grid (collective).

    Parameters
    ----------
    path : path
        The same file on all ranks.
    comm : Comm

    Returns
    -------
    MeshSlice

    Raises
    ------
    FileError, MeshError
        As `read_mesh`, on all ranks alike.
    """
    source = str(path)
    with ExitStack() as stack:
        file = agreed(comm, lambda: stack.enter_context(read_hdf5(path)))
        grid = agreed(comm, lambda: GridRows(source, grid_of(file, path)))
        elements = agreed(comm, lambda: _read_elements(grid, comm))
        points = read_points(grid, comm)
        face_rows = agreed(comm, lambda: _read_faces(grid, comm))
    dim = _dimension(elements, source, comm)
    is_cell = kind_tables().dim[elements.kind] == dim
    cells = elements.taken(is_cell) if not is_cell.all() else elements
    counts = np.concatenate(comm.allgather(np.array([len(cells.kind)], GID)))
    first = np.concatenate(([0], np.cumsum(counts)))
    agreed(comm, lambda: _check_cells(cells, source, int(first[comm.rank])))
    packed = _packed_cells(cells, face_rows, points, comm)
    about = {"n_points": points.n_points, "dim": dim, "space_dim": points.space_dim(dim)}
    bare = assemble_slice(packed, about | {"groups": []}, first, comm)
    loose, told = _loose_elements(elements, ~is_cell, points, dim, comm)
    if not told:
        return bare
    packed |= _packed_groups(loose, len(told), bare)
    return assemble_slice(packed, about | {"groups": told}, first, comm)


def _read_elements(grid: GridRows, comm: Comm) -> _Elements:
    """Read this rank's stretch of the elements."""
    bounds = block_bounds(int(grid.n_cells.sum()), comm.size)
    lo, hi = int(bounds[comm.rank]), int(bounds[comm.rank + 1])
    fields = {name: grid.field("CellData", name, lo, hi) for name in grid.field_names("CellData")}
    found = _Elements(grid.kinds(lo, hi), *grid.rows(grid.cells(), lo, hi), fields)
    solids = grid.polyhedra()
    if solids is not None:
        face_indptr, faces = grid.rows(solids[0], lo, hi)
        found = replace(found, face_indptr=face_indptr, faces=faces)
    return _numbered(_without_ghosts(found))


def _without_ghosts(elements: _Elements) -> _Elements:
    """Drop the copies of other partitions' elements (bit 1 of `vtkGhostType`)."""
    ghost = elements.fields.get("vtkGhostType")
    if ghost is None or ghost.dtype.kind not in "iu":
        return elements
    keep = (ghost.reshape(len(ghost), int(np.prod(ghost.shape[1:])))[:, 0] & 1) == 0
    fields = {name: rows for name, rows in elements.fields.items() if name != "vtkGhostType"}
    elements = replace(elements, fields=fields)
    return elements if keep.all() else elements.taken(keep)


def _numbered(elements: _Elements) -> _Elements:
    """Give every field native byte order and one column where one is enough."""
    return replace(elements, fields={n: as_numbers(v) for n, v in elements.fields.items()})


def _read_faces(grid: GridRows, comm: Comm) -> tuple[Int64Array, IntArray, Int64Array] | None:
    """Read this rank's stretch of the faces of polyhedra, with the bounds of all stretches."""
    solids = grid.polyhedra()
    if solids is None:
        return None
    bounds = block_bounds(int(solids[1].rows.sum()), comm.size)
    return *grid.rows(solids[1], int(bounds[comm.rank]), int(bounds[comm.rank + 1])), bounds


def _dimension(elements: _Elements, source: str, comm: Comm) -> int:
    """Return the dimension of the cells: the highest there is on any rank."""
    counts = comm.allreduce(np.bincount(elements.kind, minlength=256).astype(np.int64))
    codes = np.flatnonzero(counts)
    try:
        return cell_dimension(codes, counts[codes])
    except MeshError as error:
        raise MeshError(f"{source}: {error}") from error


def _check_cells(cells: _Elements, source: str, first: int) -> None:
    """Refuse cells with wrong numbers of points."""
    try:
        check_kinds(cells.kind, cells.indptr, first=first)
    except MeshError as error:
        raise MeshError(f"{source}: {error}") from error


def _packed_cells(
    cells: _Elements,
    face_rows: tuple[Int64Array, IntArray, Int64Array] | None,
    points: FilePoints,
    comm: Comm,
) -> dict[str, Array]:
    """Fetch the points of the cells; return the arrays of the slice."""
    packed: dict[str, Array] = {"kind": cells.kind, "indptr": cells.indptr}
    ids, face_points = cells.indices, np.empty(0, cells.indices.dtype)
    has_solids = np.array([np.any(cells.kind == POLYHEDRON)], np.int64)
    solid = comm.allreduce(has_solids, "max")[0] and cells.faces is not None
    if solid and face_rows is not None and cells.faces is not None:
        used, packed["poly_cell_indices"] = compact(cells.faces)
        packed["poly_face_gid"] = used
        assert cells.face_indptr is not None
        packed["poly_cell_indptr"] = cells.face_indptr
        indptr, data, bounds = face_rows
        packed["poly_face_indptr"], face_points = ask_ragged(
            comm, indptr, data, first=bounds, gid=used
        )
    in_file, number = compact(np.concatenate([ids, face_points]) if len(face_points) else ids)
    point_gid, place = compact(points.numbers(in_file, comm))
    packed["point_gid"] = point_gid
    number = number if points.is_plain else place[number]
    packed["indices"] = number[: len(ids)]
    if solid:
        packed["poly_face_indices"] = number[len(ids) :]
        agreed(comm, lambda: _check_solids(packed, len(point_gid)))
    packed["points"] = ask_rows(comm, points.positions, first=points.first, gid=point_gid)
    for name, rows in points.fields.items():
        packed[f"point:{name}"] = ask_rows(comm, rows, first=points.first, gid=point_gid)
    packed.update({f"cell:{name}": rows for name, rows in cells.fields.items()})
    return packed


def _check_solids(packed: dict[str, Array], n_points: int) -> None:
    """Refuse polyhedra with too few faces, and faces with too few points."""
    names = ("face_indptr", "face_indices", "cell_indptr", "cell_indices")
    solids = Polyhedra(*(packed[f"poly_{name}"] for name in names))
    check_polyhedra(solids, packed["kind"], n_points)


def _loose_elements(
    elements: _Elements, low: BoolArray, points: FilePoints, dim: int, comm: Comm
) -> tuple[Elements, list[tuple[str, int, int]]]:
    """Return the elements of lower dimension with their groups: name, tag and size of each."""
    rows = np.flatnonzero(low)
    dimension = kind_tables().dim[elements.kind[rows]].astype(np.int64)
    tags = np.full(len(rows), -1, np.int64)
    label = tag_label(elements.fields)
    if label is not None:
        tags = elements.fields[label][rows].astype(np.int64)
    pairs = np.unique(np.stack([dimension, tags], axis=1), axis=0)
    pairs = np.unique(np.concatenate(comm.allgather(pairs)), axis=0)
    group = np.full(len(rows), -1, np.int64)
    for k, (of_dim, tag) in enumerate(pairs.tolist()):
        group[(dimension == of_dim) & (tags == tag)] = k
    count = np.bincount(group, minlength=len(pairs)).astype(np.int64)
    before, total = comm.exscan(count), comm.allreduce(count)
    order = np.argsort(group, kind="stable")
    element_gid = np.empty(len(rows), np.int64)
    start = np.repeat(np.cumsum(count) - count, count)
    element_gid[order] = np.arange(len(rows)) - start + np.repeat(before, count)
    indptr, ids = take_ragged(elements.indptr, elements.indices, rows)
    used, number = compact(ids)
    gid = points.numbers(used, comm)
    loose = Elements(
        group, element_gid, elements.kind[rows], indptr, gid[number] if len(ids) else gid
    )
    names = _group_names(pairs.tolist(), label)
    return loose, [
        (name, tag, int(n)) for name, (_, tag), n in zip(names, pairs.tolist(), total, strict=True)
    ]


def _group_names(pairs: list[list[int]], label: str | None) -> list[str]:
    """Name groups as `build_mesh` does, a number behind a name that comes twice."""
    plain = [
        ("points", "lines", "surfaces")[dim] if label is None else f"{label}={tag}"
        for dim, tag in pairs
    ]
    again = [plain[: k + 1].count(name) for k, name in enumerate(plain)]
    return [name if n == 1 else f"{name} ({n})" for name, n in zip(plain, again, strict=True)]


def _packed_groups(loose: Elements, n_groups: int, held: MeshSlice) -> dict[str, Array]:
    """Bring boundary elements to their cells; return the arrays of the groups of the slice."""
    assert held.point_gid is not None
    mine, cells = attach_elements(
        loose,
        held.mesh,
        point_gid=held.point_gid,
        n_points=held.n_points,
        rank_first=held.rank_first,
        comm=held.comm,
    )
    packed: dict[str, Array] = {}
    for k in range(n_groups):
        rows = np.flatnonzero(mine.group == k)
        some = mine.taken(rows)
        local = np.searchsorted(held.point_gid, some.indices).astype(np.int32)
        packed |= {
            f"group:{k}:kind": some.kind,
            f"group:{k}:indptr": some.indptr,
            f"group:{k}:indices": local,
            f"group:{k}:element_gid": some.element_gid,
            f"group:{k}:cell_gid": cells[rows],
        }
    return packed
