"""Rows of a VTKHDF grid by number, whichever of the file's partitions they lie in.

The arrays of the partitions of a grid follow each other, but ids are local to a partition and
offsets restart in each; here rows are counted through, over the partitions of the step that is
read. Ids are read in blocks, so that no wide copy of them is made.

Source: VTK file formats, "VTKHDF" (https://docs.vtk.org), versions 1.0 to 2.6.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from sfcpart.dtypes import OFFSET, Array, Int64Array, IntArray, index_dtype
from sfcpart.errors import FileError, MeshError
from sfcpart.files.meshes.vtkhdf_extent import at_step, dataset_of, extent_of, numbers_of

__all__ = ["GridRows", "Relation"]

_BLOCK = 1 << 21


@dataclass(frozen=True)
class Relation:
    """One relation of the file: rows of ids, with the partitions' numbers of everything.

    Attributes
    ----------
    offsets, ids : str
        Datasets.
    first_offset, first_id : int
        Where the step begins in them.
    rows, entries, items : (n_partitions,) int64
        Rows and ids of each partition, and how many things an id can mean there.
    """

    offsets: str
    ids: str
    first_offset: int
    first_id: int
    rows: Int64Array
    entries: Int64Array
    items: Int64Array


class GridRows:
    """A grid of which rows are read by number."""

    def __init__(self, path: str, group: Any) -> None:
        self.path, self.group = path, group
        self.extent = extent_of(group, path)
        self.n_cells = np.array(self.extent.n_cells, np.int64)
        self.n_points = np.array(self.extent.n_points, np.int64)

    @property
    def n_partitions(self) -> int:
        """Partitions of the step."""
        return len(self.n_cells)

    def cells(self) -> Relation:
        """Return the relation of cells to points."""
        extent = self.extent
        first = extent.cell + extent.first_part
        entries = np.array(extent.n_ids, np.int64)
        return Relation(
            "Offsets", "Connectivity", first, extent.id, self.n_cells, entries, self.n_points
        )

    def polyhedra(self) -> tuple[Relation, Relation] | None:
        """Return the relations of cells to faces and of faces to points, if there are any."""
        if "PolyhedronToFaces" not in self.group:
            return None
        extent = self.extent
        faces, face = self._counts("NumberOfFaces")
        points, point = self._counts("NumberOfFaceConnectivityIds")
        links, link = self._counts("NumberOfPolyhedronToFaceIds")
        cell = extent.cell + extent.first_part
        return (
            Relation(
                "PolyhedronOffsets", "PolyhedronToFaces", cell, link, self.n_cells, links, faces
            ),
            Relation(
                "FaceOffsets",
                "FaceConnectivity",
                face + extent.first_part,
                point,
                faces,
                points,
                self.n_points,
            ),
        )

    def _counts(self, name: str) -> tuple[Int64Array, int]:
        """Return counts of the step's partitions, and the sum of those before them."""
        counts = numbers_of(self.group, name, self.path)
        first = self.extent.first_part
        if len(counts) < first + self.n_partitions:
            raise FileError(f"{self.path}: VTKHDF/{name} has {len(counts)} entries; too few")
        return counts[first : first + self.n_partitions], int(counts[:first].sum())

    def kinds(self, lo: int, hi: int) -> Array:
        """Return the VTK types of cells."""
        return self._read("Types", "u", self.extent.cell + lo, self.extent.cell + hi)

    def points(self, lo: int, hi: int) -> Array:
        """Return coordinates."""
        return self._read("Points", "fiu", self.extent.point + lo, self.extent.point + hi)

    def field_names(self, where: str) -> list[str]:
        """Name the fields of numbers in "CellData" or "PointData"."""
        group = self.group.get(where, {})
        dtypes = {name: getattr(group[name], "dtype", None) for name in group}
        return [name for name, dtype in dtypes.items() if dtype is not None and dtype.kind in _REAL]

    def field(self, where: str, name: str, lo: int, hi: int) -> Array:
        """Return rows of a field."""
        start = self.extent.cell if where == "CellData" else self.extent.point
        if self.extent.step >= 0 and name in self.group["Steps"].get(f"{where}Offsets", {}):
            starts = self.group["Steps"][f"{where}Offsets"]
            start = at_step(starts, name, self.extent.step, self.path)
        return self._read(f"{where}/{name}", _REAL, start + lo, start + hi)

    def _read(self, name: str, dtype_kinds: str, lo: int, hi: int) -> Array:
        """Read consecutive rows of a dataset."""
        dataset = dataset_of(self.group, name, dtype_kinds, self.path)
        length = dataset.shape[0] if dataset.shape else 0
        if length < hi:
            raise FileError(
                f"{self.path}: VTKHDF/{name} has {length} rows; the counts ask for {hi}"
            )
        return np.asarray(dataset[lo:hi])

    def rows(self, relation: Relation, lo: int, hi: int) -> tuple[Int64Array, IntArray]:
        """Return rows lo to hi - 1 of a relation, with ids counted through, as CSR."""
        starts = [self._starts(relation, *stretch) for stretch in _stretches(relation.rows, lo, hi)]
        size = [np.diff(piece) for piece in starts]
        indptr = np.concatenate([[0], *size]).astype(OFFSET)
        np.cumsum(indptr, out=indptr)
        ids = np.empty(int(indptr[-1]), index_dtype(int(relation.items.sum())))
        at = 0
        for (partition, _, _), piece in zip(_stretches(relation.rows, lo, hi), starts, strict=True):
            n = int(piece[-1] - piece[0])
            self._ids(relation, partition, int(piece[0]), ids[at : at + n])
            at += n
        return indptr, ids

    def _starts(self, relation: Relation, partition: int, lo: int, hi: int) -> Int64Array:
        """Return where rows lo to hi of a partition begin among its ids."""
        first = relation.first_offset + int(relation.rows[:partition].sum()) + partition
        starts = self._read(relation.offsets, "iu", first + lo, first + hi + 1).astype(OFFSET)
        total, last = int(relation.entries[partition]), hi == relation.rows[partition]
        if (lo == 0 and starts[0] != 0) or (last and starts[-1] != total):
            raise FileError(
                f"{self.path}: VTKHDF/{relation.offsets} of partition {partition} goes from "
                f"{starts[0]} to {starts[-1]}; wanted 0 to {total}"
            )
        if np.any(starts[1:] < starts[:-1]) or starts[0] < 0 or starts[-1] > total:
            raise FileError(
                f"{self.path}: VTKHDF/{relation.offsets} of partition {partition} falls somewhere"
            )
        return starts

    def _ids(self, relation: Relation, partition: int, start: int, out: IntArray) -> None:
        """Fill in ids from the `start`-th of a partition on, counted through."""
        base = relation.first_id + int(relation.entries[:partition].sum())
        shift, bound = int(relation.items[:partition].sum()), int(relation.items[partition])
        for a in range(0, len(out), _BLOCK):
            b = min(a + _BLOCK, len(out))
            ids = self._read(relation.ids, "iu", base + start + a, base + start + b)
            if ids.min() < 0 or ids.max() >= bound:
                bad = int(np.flatnonzero((ids < 0) | (ids >= bound))[0])
                raise MeshError(
                    f"{self.path}: entry {start + a + bad} of VTKHDF/{relation.ids} in partition "
                    f"{partition} is {ids[bad]}; the partition has {bound} of these, "
                    f"0 to {bound - 1}"
                )
            np.add(ids, shift, out=out[a:b], casting="unsafe")


_REAL = "biuf"


def _stretches(rows: Int64Array, lo: int, hi: int) -> Iterator[tuple[int, int, int]]:
    """Yield (partition, first row, row after) for the partitions that rows lo to hi - 1 meet."""
    ends = np.cumsum(rows)
    partition = int(np.searchsorted(ends, lo, side="right"))
    while lo < hi:
        start, end = int(ends[partition] - rows[partition]), int(ends[partition])
        stop = min(hi, end)
        if stop > lo:
            yield partition, lo - start, stop - start
        lo, partition = stop, partition + 1
