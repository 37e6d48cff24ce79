"""Read VTKHDF files of type UnstructuredGrid, the open HDF5 format of VTK.

One or several partitions, mixed kinds in any order, polyhedra, cell and point fields. Ids are
read in blocks and stored as int32 where they fit, so 10^7 hexahedra take about 70 bytes a cell.
Ghost cells (`vtkGhostType`, bit 1) are dropped, so no cell is counted twice. Points of several
partitions are joined where `PointData/GlobalPointIds` says they are one; without it they stay
separate and the mesh has a crack along the partitions (`Mesh.with_points_merged` closes it).
Of a file with time steps the last step is read. Field data of the whole grid are not read.

Source: VTK file formats, "VTKHDF" (https://docs.vtk.org), versions 1.0 to 2.6.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from os import PathLike
from typing import Any, NamedTuple

import numpy as np

from sfcpart.dtypes import COORDINATE, OFFSET, Array, Int64Array, IntArray, index_dtype
from sfcpart.errors import FileError, MeshError
from sfcpart.files.hdf5 import read_hdf5
from sfcpart.files.meshes.raw import RawMesh, join_pieces
from sfcpart.files.meshes.vtkhdf_extent import at_step, dataset_of, extent_of, grid_of, numbers_of
from sfcpart.mesh.kinds import kind_tables
from sfcpart.mesh.mesh import Polyhedra

__all__ = ["VtkhdfCounts", "read_vtkhdf", "vtkhdf_cell_rows", "vtkhdf_counts"]

_BLOCK = 1 << 21  # ids converted at a time: 16 MB, small beside any mesh worth splitting


def read_vtkhdf(path: str | PathLike[str]) -> RawMesh:
    """Read an unstructured grid.

    Parameters
    ----------
    path : path
        A `.vtkhdf` file (or any HDF5 file with a group `VTKHDF`).

    Returns
    -------
    RawMesh
        Elements in file order, ghosts left out.

    Raises
    ------
    FileError
        If the file cannot be read, is of another VTKHDF type, or its arrays do not fit together.
    MeshError
        If a partition names points it does not have.
    """
    with read_hdf5(path) as file:
        reader = _Reader(str(path), grid_of(file, path))
        raw = reader.read()
    return join_pieces(raw, len(reader.extent.n_cells), str(path))


class VtkhdfCounts(NamedTuple):
    """What a file holds, ghosts included.

    Attributes
    ----------
    n_cells, n_points : int
    n_faces : int
        Faces of all cells, shared ones from both sides: as many as a cell has points, 6 at most
        (right for simplices, pyramids and hexahedra, a sixth too many for wedges), and those that
        polyhedra list.
    n_bytes : int
        Of the arrays in memory once they are read.
    """

    n_cells: int
    n_points: int
    n_faces: int
    n_bytes: int


def vtkhdf_counts(path: str | PathLike[str]) -> VtkhdfCounts:
    """Return the size of the step that would be read, without reading it.

    Raises
    ------
    FileError
        As for `read_vtkhdf`.
    """
    with read_hdf5(path) as file:
        return _Reader(str(path), grid_of(file, path)).counts()


def vtkhdf_cell_rows(path: str | PathLike[str]) -> tuple[int, Int64Array]:
    """Return how many rows a cell field of the file has, and the row of each cell of the mesh.

    Ghosts, elements of lower dimension and other time steps have rows too, but are no cells.

    Raises
    ------
    FileError
        As for `read_vtkhdf`.
    """
    with read_hdf5(path) as file:
        reader = _Reader(str(path), grid_of(file, path))
        n_rows = int(dataset_of(reader.group, "Types", "u", str(path)).shape[0])
        dim, first = reader.dimensions(), reader.extent.cell
    return n_rows, first + np.flatnonzero(dim == dim.max(initial=0))


@dataclass
class _Reader:
    """One file that is being read."""

    path: str
    group: Any

    def __post_init__(self) -> None:
        self.extent = extent_of(self.group, self.path)

    def read(self) -> RawMesh:
        """Read everything of the step."""
        extent = self.extent
        n_points, n_cells = sum(extent.n_points), sum(extent.n_cells)
        points = self._rows("Points", extent.point, n_points, "fiu").astype(COORDINATE, copy=False)
        kind = self._rows("Types", extent.cell, n_cells, "u")
        indices = self._ids("Connectivity", extent.id, extent.n_ids, extent.n_points)
        first_offset = extent.cell + extent.first_part
        indptr = self._indptr("Offsets", first_offset, extent.n_cells, extent.n_ids)
        return RawMesh(
            points=points,
            kind=kind,
            indptr=indptr,
            indices=indices,
            polyhedra=self._polyhedra(),
            cell_fields=self._fields("CellData", extent.cell, n_cells),
            point_fields=self._fields("PointData", extent.point, n_points),
        )

    def counts(self) -> VtkhdfCounts:
        """Count what `read` would return."""
        n_cells, n_points, n_ids = map(
            sum, (self.extent.n_cells, self.extent.n_points, self.extent.n_ids)
        )
        id_bytes = np.dtype(index_dtype(n_points)).itemsize
        n_bytes = 24 * n_points + 9 * n_cells + id_bytes * n_ids
        n_faces = min(n_ids, 6 * n_cells)
        if "PolyhedronToFaces" in self.group:
            links, face_ids = (
                sum(self._part_counts(name)[0])
                for name in ("NumberOfPolyhedronToFaceIds", "NumberOfFaceConnectivityIds")
            )
            n_faces += links
            n_bytes += id_bytes * (links + face_ids) + 8 * (n_cells + links)
        for where, n_rows in (("CellData", n_cells), ("PointData", n_points)):
            n_bytes += n_rows * sum(map(_row_bytes, self.group.get(where, {}).values()))
        return VtkhdfCounts(n_cells, n_points, n_faces, n_bytes)

    def dimensions(self) -> Array:
        """Return the dimension of each element of the step, -1 for ghosts."""
        extent, n_cells = self.extent, sum(self.extent.n_cells)
        dim = kind_tables().dim[self._rows("Types", extent.cell, n_cells, "u")]
        ghost = self._fields("CellData", extent.cell, n_cells).get("vtkGhostType")
        return dim if ghost is None else np.where(ghost & 1, -1, dim)

    def _rows(self, name: str, start: int, count: int, dtype_kinds: str) -> Array:
        """Read consecutive rows of a dataset."""
        dataset = dataset_of(self.group, name, dtype_kinds, self.path)
        self._check_length(name, dataset, start + count)
        return np.asarray(dataset[start : start + count])

    def _check_length(self, name: str, dataset: Any, wanted: int) -> None:
        """Refuse a dataset that is shorter than the counts say."""
        length = dataset.shape[0] if dataset.shape else 0
        if length < wanted:
            raise FileError(
                f"{self.path}: VTKHDF/{name} has {length} rows; the counts ask for {wanted}"
            )

    def _ids(self, name: str, start: int, counts: list[int], bounds: list[int]) -> IntArray:
        """Read ids that are local to each part and make them ids of the joined parts."""
        dataset = dataset_of(self.group, name, "iu", self.path)
        self._check_length(name, dataset, start + sum(counts))
        joined = np.empty(sum(counts), index_dtype(sum(bounds)))
        done, shift = 0, 0
        for part, (count, bound) in enumerate(zip(counts, bounds, strict=True)):
            for a, b in _blocks(count):
                ids = dataset[start + done + a : start + done + b]
                self._check_range(name, ids, bound, part, a)
                np.add(ids, shift, out=joined[done + a : done + b], casting="unsafe")
            done += count
            shift += bound
        return joined

    def _check_range(self, name: str, ids: Array, bound: int, part: int, first: int) -> None:
        """Refuse ids that name nothing in their own part."""
        if ids.min() < 0 or ids.max() >= bound:
            bad = int(np.flatnonzero((ids < 0) | (ids >= bound))[0])
            raise MeshError(
                f"{self.path}: entry {first + bad} of VTKHDF/{name} in partition {part} is "
                f"{ids[bad]}; the partition has {bound} of these, 0 to {bound - 1}"
            )

    def _indptr(self, name: str, start: int, rows: list[int], totals: list[int]) -> Int64Array:
        """Read the offsets of each part (they restart at 0) and chain them."""
        dataset = dataset_of(self.group, name, "iu", self.path)
        self._check_length(name, dataset, start + sum(rows) + len(rows))
        indptr = np.zeros(sum(rows) + 1, OFFSET)
        done, shift = 0, 0
        for part, (count, total) in enumerate(zip(rows, totals, strict=True)):
            own = indptr[done : done + count + 1]
            own[:] = dataset[start + done + part : start + done + part + count + 1]
            if own[0] != 0 or own[-1] != total:
                raise FileError(
                    f"{self.path}: VTKHDF/{name} of partition {part} goes from {own[0]} to "
                    f"{own[-1]}; wanted 0 to {total}"
                )
            if np.any(own[1:] < own[:-1]):
                raise FileError(f"{self.path}: VTKHDF/{name} of partition {part} falls somewhere")
            own += shift
            done += count
            shift += total
        return indptr

    def _polyhedra(self) -> Polyhedra | None:
        """Read the faces of polyhedra, if the file has any."""
        if "PolyhedronToFaces" not in self.group:
            return None
        extent = self.extent
        faces, face_first = self._part_counts("NumberOfFaces")
        face_ids, face_id_first = self._part_counts("NumberOfFaceConnectivityIds")
        links, link_first = self._part_counts("NumberOfPolyhedronToFaceIds")
        first_offset = face_first + extent.first_part
        return Polyhedra(
            self._indptr("FaceOffsets", first_offset, faces, face_ids),
            self._ids("FaceConnectivity", face_id_first, face_ids, extent.n_points),
            self._indptr(
                "PolyhedronOffsets", extent.cell + extent.first_part, extent.n_cells, links
            ),
            self._ids("PolyhedronToFaces", link_first, links, faces),
        )

    def _part_counts(self, name: str) -> tuple[list[int], int]:
        """Return counts of the step's parts, and the sum of those before them."""
        counts = numbers_of(self.group, name, self.path)
        first, n_parts = self.extent.first_part, len(self.extent.n_cells)
        if len(counts) < first + n_parts:
            raise FileError(f"{self.path}: VTKHDF/{name} has {len(counts)} entries; too few")
        return counts[first : first + n_parts].tolist(), int(counts[:first].sum())

    def _fields(self, where: str, start: int, n_rows: int) -> dict[str, Array]:
        """Read the fields that hold numbers."""
        group = self.group.get(where, {})
        fields = {}
        for name in group:
            dataset = group[name]
            if getattr(dataset, "dtype", None) is None or dataset.dtype.kind not in "biuf":
                continue
            at = start
            if self.extent.step >= 0 and name in self.group["Steps"].get(f"{where}Offsets", {}):
                starts = self.group["Steps"][f"{where}Offsets"]
                at = at_step(starts, name, self.extent.step, self.path)
            fields[name] = self._rows(f"{where}/{name}", at, n_rows, "biuf")
        return fields


def _row_bytes(dataset: Any) -> int:
    """Return the bytes of a row of a field of numbers, 0 for anything else."""
    dtype = getattr(dataset, "dtype", None)
    if dtype is None or dtype.kind not in "biuf":
        return 0
    return int(dtype.itemsize * np.prod(dataset.shape[1:], dtype=np.int64))


def _blocks(count: int) -> Iterator[tuple[int, int]]:
    """Yield consecutive (start, stop) that cover 0..count."""
    for start in range(0, count, _BLOCK):
        yield start, min(start + _BLOCK, count)
