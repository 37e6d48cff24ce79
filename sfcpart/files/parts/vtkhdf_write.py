"""Write all parts as one VTKHDF UnstructuredGrid file, exchange lists beside it.

What: every part is one partition of the open VTKHDF standard: its points, its owned cells in
curve order, then its halo cells marked in `vtkGhostType`; `GlobalCellIds` and `GlobalPointIds`
number the unsplit mesh; the cell field `part` names the owner of each cell. Polyhedra are kept.
How: block by block (`sfcpart.files.parts.pieces`) into contiguous datasets, so that memory stays
bounded.
The group `/sfcpart` (`sfcpart.files.parts.lists`) lies outside `/VTKHDF`, where readers ignore it.
Source: VTK file format documentation, "VTKHDF" (versions 2.2, 2.5 polyhedra, 2.6 attributes).
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import COORDINATE, GID, KIND, OFFSET, PART, Array, Int64Array, index_dtype
from sfcpart.files.hdf5 import create_hdf5
from sfcpart.files.parts.boundary import groups_by_part
from sfcpart.files.parts.fields import file_dtype, gathered, writable_fields
from sfcpart.files.parts.lists import write_groups, write_lists
from sfcpart.files.parts.pieces import (
    Block,
    Drawing,
    Renumbered,
    blocks,
    check_same_cells,
    drawing_of,
)

if TYPE_CHECKING:
    from collections.abc import Mapping
    from os import PathLike

    from sfcpart.halo import Halo
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = ["CELL_NAMES", "POINT_NAMES", "write_vtkhdf"]

CELL_NAMES = frozenset({"vtkGhostType", "GlobalCellIds", "part"})
POINT_NAMES = frozenset({"vtkGhostType", "GlobalPointIds"})
_VERSION = (2, 6)
_CHUNK_BYTES = 1 << 19


class _Column:
    """A dataset that is filled from the front, block by block."""

    def __init__(self, dataset: Any) -> None:
        self.dataset = dataset
        self.at = 0

    def append(self, rows: Array) -> None:
        """Write the next rows."""
        if len(rows):
            self.dataset[self.at : self.at + len(rows)] = rows
            self.at += len(rows)


class _Columns:
    """Datasets of one group, created with their final length."""

    def __init__(self, group: Any, *, compress: bool) -> None:
        self.group = group
        self.compress = compress

    def create(self, name: str, n_rows: int, dtype: Any, *, width: tuple[int, ...] = ()) -> _Column:
        """Create an empty dataset of `n_rows` rows."""
        options: dict[str, Any] = {}
        if self.compress and n_rows:
            row_bytes = np.dtype(dtype).itemsize * int(np.prod(width, dtype=np.int64))
            rows = max(1, min(n_rows, _CHUNK_BYTES // max(1, row_bytes)))
            options = {"chunks": (rows, *width), "compression": "gzip", "compression_opts": 1}
            options["shuffle"] = True
        return _Column(
            self.group.create_dataset(name, shape=(n_rows, *width), dtype=dtype, **options)
        )

    def inside(self, name: str) -> _Columns:
        """Return the columns of a new group within this one."""
        return _Columns(self.group.create_group(name), compress=self.compress)


def write_vtkhdf(
    path: str | PathLike[str],
    mesh: Mesh,
    *,
    partition: Partition,
    halo: Halo,
    compress: bool = False,
    input_digest: str = "",
) -> None:
    """Write the parts of a mesh into one VTKHDF file.

    Parameters
    ----------
    path : path
        The file, replaced if it exists; see `sfcpart.files.parts.folder` for writing safely.
    mesh : Mesh
        Cell and point fields go along; without points, cells become vertices at their centres.
    partition : Partition
    halo : Halo
        Local order of each part and its exchange lists.
    compress : bool, optional
        Whether to pack with gzip and shuffle: smaller and slower.
    input_digest : str, optional
        Text kept with the lists to tell which mesh was split.

    Raises
    ------
    FileError
        If the file cannot be written.
    PartitionError
        If the lists belong to another mesh.

    Notes
    -----
    O(entries) time; memory for one block of about a million cells and the point numbers.
    Version 2.6 is declared because global ids carry the string attribute `Attribute`.
    """
    drawing = drawing_of(mesh)
    check_same_cells(drawing, partition, halo)
    with create_hdf5(path) as file:
        root = _Columns(file.create_group("VTKHDF"), compress=compress)
        root.group.attrs["Version"] = np.array(_VERSION, np.int64)
        root.group.attrs.create("Type", np.bytes_("UnstructuredGrid"))
        writer = _CellWriter(root, mesh, drawing, partition, halo)
        for block in blocks(drawing, halo):
            writer.append(block)
        writer.finish()
        point_fields = mesh.point_fields if drawing.points is mesh.points else {}
        _write_points(root, drawing, point_fields, writer.point_gid)
        write_lists(file, halo, input_digest=input_digest)
        write_groups(file, groups_by_part(mesh, halo, writer.points_of_parts()))


class _CellWriter:
    """Everything that has one row a cell, an entry or a part."""

    def __init__(
        self, root: _Columns, mesh: Mesh, drawing: Drawing, partition: Partition, halo: Halo
    ) -> None:
        self.root, self.drawing, self.cell_part = root, drawing, partition.cell_part
        n_rows = len(halo.owned) + len(halo.halo)
        n_entries = _entries_with_halo(drawing.indptr, halo)
        self.count: dict[str, list[Int64Array]] = {}
        self.point_gid: list[Array] = []
        self.entries = root.create("Connectivity", n_entries, index_dtype(len(drawing.points)))
        self.offsets = root.create("Offsets", n_rows + halo.n_parts, index_dtype(n_entries))
        self.types = root.create("Types", n_rows, KIND)
        data = root.inside("CellData")
        self.ghost = data.create("vtkGhostType", n_rows, KIND)
        self.gid = _global_ids(data, "GlobalCellIds", n_rows)
        self.part = data.create("part", n_rows, PART)
        self.fields = _field_columns(data, writable_fields(mesh.cell_fields, CELL_NAMES), n_rows)
        self.faces = None if drawing.polyhedra is None else _FaceWriter(root, drawing, halo)

    def append(self, block: Block) -> None:
        """Write one block of parts."""
        self.entries.append(block.points.entries)
        self.offsets.append(block.points.offsets)
        self.types.append(self.drawing.kind[block.cells])
        self.ghost.append(block.ghost)
        self.gid.append(block.cells.astype(GID))
        self.part.append(self.cell_part[block.cells])
        for field, column in self.fields:
            column.append(gathered(field, block.cells))
        self.point_gid.append(block.points.used)
        self._count("NumberOfCells", np.diff(block.cell_indptr))
        self._count("NumberOfPoints", np.diff(block.points.used_indptr))
        self._count("NumberOfConnectivityIds", np.diff(block.points.entry_indptr))
        if self.faces is not None and block.faces is not None and block.face_points is not None:
            self.faces.append(block.faces, block.face_points)

    def points_of_parts(self) -> list[Array]:
        """Return the global numbers of the points of each part."""
        ends = np.cumsum(np.concatenate(self.count["NumberOfPoints"]))[:-1]
        return np.split(np.concatenate(self.point_gid), ends)

    def _count(self, name: str, rows: Int64Array) -> None:
        self.count.setdefault(name, []).append(rows)

    def finish(self) -> None:
        """Write the sizes of the parts."""
        for name, rows in self.count.items():
            self.root.group.create_dataset(name, data=np.concatenate(rows))
        if self.faces is not None:
            self.faces.finish()


class _FaceWriter:
    """Faces of the polyhedra; those of one part are known only when all blocks are done."""

    def __init__(self, root: _Columns, drawing: Drawing, halo: Halo) -> None:
        assert drawing.polyhedra is not None
        self.root = root
        n_rows = len(halo.owned) + len(halo.halo)
        n_entries = _entries_with_halo(drawing.polyhedra.cell_indptr, halo)
        self.faces = root.create("PolyhedronToFaces", n_entries, GID)
        self.offsets = root.create("PolyhedronOffsets", n_rows + halo.n_parts, OFFSET)
        self.face_points: list[Renumbered] = []
        self.sizes: list[tuple[Int64Array, Int64Array, Int64Array]] = []

    def append(self, faces: Renumbered, face_points: Renumbered) -> None:
        """Write the faces of one block of parts and keep their points."""
        self.faces.append(faces.entries)
        self.offsets.append(faces.offsets)
        self.face_points.append(face_points)
        entries = np.diff(face_points.entry_indptr)
        self.sizes.append((np.diff(faces.used_indptr), entries, np.diff(faces.entry_indptr)))

    def finish(self) -> None:
        """Write the points of the faces."""
        names = ("NumberOfFaces", "NumberOfFaceConnectivityIds", "NumberOfPolyhedronToFaceIds")
        for name, rows in zip(names, zip(*self.sizes, strict=True), strict=True):
            self.root.group.create_dataset(name, data=np.concatenate(rows))
        n_entries = sum(len(kept.entries) for kept in self.face_points)
        entries = self.root.create("FaceConnectivity", n_entries, GID)
        n_offsets = sum(len(kept.offsets) for kept in self.face_points)
        offsets = self.root.create("FaceOffsets", n_offsets, OFFSET)
        for kept in self.face_points:
            entries.append(kept.entries)
            offsets.append(kept.offsets)


def _entries_with_halo(indptr: Int64Array, halo: Halo) -> int:
    """Return the entries of a relation's rows, those of halo cells counted again."""
    return int(indptr[-1] + (indptr[halo.halo + 1] - indptr[halo.halo]).sum())


def _global_ids(data: _Columns, name: str, n_rows: int) -> _Column:
    """Create the dataset of global numbers, marked as such."""
    column = data.create(name, n_rows, GID)
    column.dataset.attrs["Attribute"] = np.bytes_("GlobalIds")
    return column


def _field_columns(
    data: _Columns, fields: Mapping[str, Array], n_rows: int
) -> list[tuple[Array, _Column]]:
    """Create one dataset for each field."""
    columns = []
    for name, field in fields.items():
        width = () if field.ndim == 1 else (int(np.prod(field.shape[1:])),)
        columns.append((field, data.create(name, n_rows, file_dtype(field.dtype), width=width)))
    return columns


def _write_points(
    root: _Columns, drawing: Drawing, point_fields: Mapping[str, Array], point_gid: list[Array]
) -> None:
    """Write everything that has one row a point."""
    n_rows = sum(len(rows) for rows in point_gid)
    points = root.create("Points", n_rows, COORDINATE, width=(3,))
    data = root.inside("PointData")
    gid = _global_ids(data, "GlobalPointIds", n_rows)
    fields = _field_columns(data, writable_fields(point_fields, POINT_NAMES), n_rows)
    for rows in point_gid:
        points.append(drawing.coordinates(rows))
        gid.append(rows.astype(GID))
        for field, column in fields:
            column.append(gathered(field, rows))
