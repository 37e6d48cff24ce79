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

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import COORDINATE, GID, KIND, OFFSET, PART, Array, Int64Array, index_dtype
from sfcpart.files.hdf5 import pack_hdf5
from sfcpart.files.parts.boundary import groups_by_part
from sfcpart.files.parts.fields import as_written, file_dtype
from sfcpart.files.parts.lists import ListWriter
from sfcpart.files.parts.pieces import Block, Renumbered, blocks, check_same_cells
from sfcpart.files.parts.supply import Supply
from sfcpart.files.parts.turns import Column, SharedHdf5, Table
from sfcpart.slices.gate import agreed
from sfcpart.slices.mesh_slice import MeshSlice

if TYPE_CHECKING:
    from os import PathLike

    from sfcpart.comm.base import Comm
    from sfcpart.halo import Halo
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = ["write_vtkhdf"]

_VERSION = (2, 6)
_CHUNK_BYTES = 1 << 19
_ROOT = "VTKHDF"
_IDS = (("Attribute", np.bytes_("GlobalIds")),)


def write_vtkhdf(
    path: str | PathLike[str],
    mesh: Mesh | MeshSlice,
    *,
    partition: Partition,
    halo: Halo,
    compress: bool = False,
    input_digest: str = "",
) -> None:
    """Write the parts of a mesh into one VTKHDF file (collective).

    Parameters
    ----------
    path : path
        The file, replaced if it exists; see `sfcpart.files.parts.folder` for writing safely.
    mesh : Mesh or MeshSlice
        Cell and point fields go along; without points, cells become vertices at their centres.
    partition : Partition
        Of the cells here.
    halo : Halo
        Local order of each of this rank's parts and its exchange lists.
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
    O(entries) time; memory for one block of cells and the point numbers. Rank 0
    lays the file out and ranks write their parts in turn: the bytes are the same for any number
    of ranks. Version 2.6 is declared because global ids carry the string attribute `Attribute`.
    """
    held = mesh if isinstance(mesh, MeshSlice) else MeshSlice.whole(mesh)
    check_same_cells(held, partition, halo)
    writer = _Writer(Path(path), held, Supply.of(held, partition), halo)
    writer.write_cells()
    writer.write_rest(input_digest)
    if compress:
        packed = writer.packed_names()
        agreed(held.comm, lambda: _pack(Path(path), packed, held.comm))


def _pack(path: Path, names: list[str], comm: Comm) -> None:
    """Pack the file, on rank 0."""
    if comm.rank == 0:
        pack_hdf5(path, names, chunk_bytes=_CHUNK_BYTES)


@dataclass(frozen=True, eq=False)
class _Counts:
    """Rows of each part of a rank, and where they begin in the file.

    Attributes
    ----------
    own : (k, n) int64
        For each part here: cells, entries, faces of cells, and so on.
    all : (n_parts, n) int64
        Of all parts.
    first : (n,) int64
        Rows of all parts before this rank's.
    """

    own: Int64Array
    all: Int64Array
    first: Int64Array

    @classmethod
    def of(cls, columns: list[Int64Array], comm: Comm) -> _Counts:
        """Gather the counts of all parts (collective)."""
        own = np.stack(columns, axis=1).astype(OFFSET)
        return cls(own, np.concatenate(comm.allgather(own)), comm.exscan(own.sum(axis=0)))

    @property
    def total(self) -> list[int]:
        """Rows of all parts."""
        return [int(n) for n in self.all.sum(axis=0)]


class _Writer:
    """One file: first all that has rows for cells, then, when their number is known, points."""

    def __init__(self, path: Path, held: MeshSlice, supply: Supply, halo: Halo) -> None:
        self.held, self.supply, self.halo, self.comm = held, supply, halo, held.comm
        self.shared = SharedHdf5(path, held.comm)
        self.tables: list[Table] = []
        self.slots: list[Int64Array] = []
        self.point_count: list[Int64Array] = [np.zeros(0, OFFSET)]
        self.face_points: list[Renumbered] = []
        self.face_count: list[Int64Array] = [np.zeros((0, 2), OFFSET)]
        self.cells = _Counts.of(self._cell_counts(), self.comm)

    def _cell_counts(self) -> list[Int64Array]:
        """Return cells, entries and faces of each part here, halo included."""
        halo = self.halo
        owned, far = (self.supply.sizes(np.asarray(rows, GID)) for rows in (halo.owned, halo.halo))
        n_cells = np.diff(halo.owned_indptr) + np.diff(halo.halo_indptr)
        sums = [
            _summed(own, halo.owned_indptr) + _summed(other, halo.halo_indptr)
            for own, other in zip(owned, far, strict=True)
        ]
        return [n_cells, *sums]

    def _lay_out(self, tables: list[Table], begin: Any = lambda file: None) -> None:
        """Lay out datasets of the grid."""
        self.tables += tables
        self.shared.lay_out(tables, begin)

    def write_cells(self) -> None:
        """Write everything with rows for cells, a block of parts at a time."""
        n_rows, n_entries, n_faces = self.cells.total
        n_offsets = n_rows + len(self.cells.all)
        fields = _field_tables("CellData", self.supply.cell_fields, n_rows)
        tables = [
            Table(f"{_ROOT}/Connectivity", n_entries, index_dtype(self.supply.points.n_items)),
            Table(f"{_ROOT}/Offsets", n_offsets, index_dtype(n_entries)),
            Table(f"{_ROOT}/Types", n_rows, KIND),
            Table(f"{_ROOT}/CellData/vtkGhostType", n_rows, KIND),
            Table(f"{_ROOT}/CellData/GlobalCellIds", n_rows, GID, (), _IDS),
            Table(f"{_ROOT}/CellData/part", n_rows, PART),
            *fields,
        ]
        if self.supply.faces is not None:
            tables.append(Table(f"{_ROOT}/PolyhedronToFaces", n_faces, GID))
            tables.append(Table(f"{_ROOT}/PolyhedronOffsets", n_offsets, OFFSET))
        self._lay_out(tables, _begin)
        columns = self._cell_columns([table.name for table in tables])
        for block in blocks(self.supply, self.halo):
            self._append(columns, block)
            self.shared.flush()

    def _cell_columns(self, names: list[str]) -> dict[str, Column]:
        """Return this rank's rows of the datasets for cells."""
        rows, entries, faces = self.cells.first.tolist()
        first = dict.fromkeys(names, rows)
        first[f"{_ROOT}/Connectivity"] = entries
        first[f"{_ROOT}/PolyhedronToFaces"] = faces
        first[f"{_ROOT}/Offsets"] = first[f"{_ROOT}/PolyhedronOffsets"] = (
            rows + self.halo.first_part
        )
        return {name: self.shared.column(name, first[name]) for name in names}

    def _append(self, columns: dict[str, Column], block: Block) -> None:
        """Take over one block of parts."""
        cells, row = block.cells, block.row
        rows = {
            "Connectivity": block.points.entries,
            "Offsets": block.points.offsets,
            "Types": cells.kind[row],
            "CellData/vtkGhostType": block.ghost,
            "CellData/GlobalCellIds": block.cell_gid,
            "CellData/part": cells.part[row],
            **{f"CellData/{name}": as_written(v[row]) for name, v in cells.fields.items()},
        }
        if block.faces is not None and block.face_points is not None:
            rows["PolyhedronToFaces"] = block.faces.entries
            rows["PolyhedronOffsets"] = block.faces.offsets
            self.face_points.append(block.face_points)
            counts = [np.diff(block.faces.used_indptr), np.diff(block.face_points.entry_indptr)]
            self.face_count.append(np.stack(counts, axis=1))
        for name, values in rows.items():
            columns[f"{_ROOT}/{name}"].append(values)
        self.slots.append(block.points.used)
        self.point_count.append(np.diff(block.points.used_indptr))

    def write_rest(self, input_digest: str) -> None:
        """Write the points, the faces of polyhedra, the sizes of the parts, and the lists."""
        points = _Counts.of([np.concatenate(self.point_count)], self.comm)
        faces = _Counts.of(list(np.concatenate(self.face_count).T), self.comm)
        point_gid = [self.supply.points.gids(slots) for slots in self.slots]
        groups = groups_by_part(self.held, self.supply, self.halo, self._by_part(point_gid))
        lists = ListWriter(self.shared, self.halo, list(groups))
        n_points = points.total[0]
        tables = [
            Table(f"{_ROOT}/Points", n_points, COORDINATE, (3,)),
            Table(f"{_ROOT}/PointData/GlobalPointIds", n_points, GID, (), _IDS),
            *_field_tables("PointData", self.supply.point_fields, n_points),
        ]
        if self.supply.faces is not None:
            n_faces, n_entries = faces.total
            tables.append(Table(f"{_ROOT}/FaceConnectivity", n_entries, GID))
            tables.append(Table(f"{_ROOT}/FaceOffsets", n_faces + len(self.cells.all), OFFSET))

        def begin(file: Any) -> None:
            for name, column in self._part_counts(points, faces).items():
                file[_ROOT].create_dataset(name, data=column)
            lists.begin(file, input_digest)

        self.tables += tables
        self.shared.lay_out([*tables, *lists.tables()], begin)
        self._append_points(points, point_gid)
        if self.supply.faces is not None:
            self._append_faces(faces)
        lists.fill()
        self.shared.flush()

    def _by_part(self, point_gid: list[Int64Array]) -> list[Int64Array]:
        """Return the global numbers of the points of each part here."""
        ends = np.cumsum(np.concatenate(self.point_count))
        rows = np.concatenate([np.zeros(0, GID), *point_gid])
        return np.split(rows, ends[:-1]) if len(ends) else []

    def _part_counts(self, points: _Counts, faces: _Counts) -> dict[str, Int64Array]:
        """Return the datasets of counts of each part."""
        counts = {
            "NumberOfCells": self.cells.all[:, 0],
            "NumberOfPoints": points.all[:, 0],
            "NumberOfConnectivityIds": self.cells.all[:, 1],
        }
        if self.supply.faces is not None:
            counts["NumberOfFaces"] = faces.all[:, 0]
            counts["NumberOfFaceConnectivityIds"] = faces.all[:, 1]
            counts["NumberOfPolyhedronToFaceIds"] = self.cells.all[:, 2]
        return counts

    def _append_points(self, points: _Counts, point_gid: list[Int64Array]) -> None:
        """Write the points of this rank's parts, a block at a time."""
        first = int(points.first[0])
        names = ["Points", "PointData/GlobalPointIds"]
        names += [f"PointData/{name}" for name in self.supply.point_fields]
        columns = {name: self.shared.column(f"{_ROOT}/{name}", first) for name in names}
        for slots, gid in zip(self.slots, point_gid, strict=True):
            columns["Points"].append(self.supply.coordinates(slots))
            columns["PointData/GlobalPointIds"].append(gid)
            for name, values in self.supply.point_fields.items():
                rows = as_written(self.supply.points.rows(values, slots))
                columns[f"PointData/{name}"].append(rows)
            self.shared.flush()

    def _append_faces(self, faces: _Counts) -> None:
        """Take over the points of the faces of polyhedra."""
        n_faces, n_entries = faces.first.tolist()
        entries = self.shared.column(f"{_ROOT}/FaceConnectivity", n_entries)
        offsets = self.shared.column(f"{_ROOT}/FaceOffsets", n_faces + self.halo.first_part)
        for kept in self.face_points:
            entries.append(kept.entries)
            offsets.append(kept.offsets)

    def packed_names(self) -> list[str]:
        """Return the datasets that are worth packing."""
        return [table.name for table in self.tables if table.n_rows]


def _begin(file: Any) -> None:
    """Begin a grid."""
    root = file.create_group(_ROOT)
    root.attrs["Version"] = np.array(_VERSION, np.int64)
    root.attrs.create("Type", np.bytes_("UnstructuredGrid"))


def _summed(values: Int64Array, indptr: Int64Array) -> Int64Array:
    """Return the sum of each stretch of values."""
    before = np.concatenate(([0], np.cumsum(values)))
    return np.diff(before[indptr])


def _field_tables(where: str, fields: Mapping[str, Array], n_rows: int) -> list[Table]:
    """Return one dataset for each field."""
    tables = []
    for name, field in fields.items():
        width = () if field.ndim == 1 else (int(np.prod(field.shape[1:])),)
        tables.append(Table(f"{_ROOT}/{where}/{name}", n_rows, file_dtype(field.dtype), width))
    return tables
