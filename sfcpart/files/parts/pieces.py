"""Cut a mesh into the local meshes of its parts, a few parts at a time.

What: for each part its owned cells in curve order, then its halo cells, with points numbered
locally by first use; what the writers of VTKHDF and VTU put into files.
How: one compiled pass renumbers a block of parts (`sfcpart.kernels.pieces`); a block holds
about a million cells, so that memory stays bounded.
Cost: O(entries) time; O(block + n_points) memory.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import (
    COORDINATE,
    KIND,
    OFFSET,
    FloatArray,
    Int64Array,
    IntArray,
    KindArray,
    index_dtype,
)
from sfcpart.errors import PartitionError
from sfcpart.kernels.threads import run_ranges

if TYPE_CHECKING:
    from collections.abc import Iterator

    from sfcpart.halo import Halo
    from sfcpart.mesh.mesh import Mesh, Polyhedra
    from sfcpart.partition import Partition

__all__ = [
    "GHOST",
    "POLYHEDRON",
    "Block",
    "Drawing",
    "Renumbered",
    "blocks",
    "check_same_cells",
    "drawing_of",
]

BLOCK_CELLS = 1 << 20
"""Cells in one block: 2^20 hexahedra take about 64 MB while they are renumbered."""
GHOST = 1
"""`vtkGhostType` of a cell that another part owns (bit 1: duplicate cell)."""
VERTEX, POLYHEDRON = 1, 42
_STRIDE = 1 << 20
_Lists = tuple[Int64Array, IntArray]


@dataclass(frozen=True, eq=False)
class Drawing:
    """A mesh as files hold it: with points, even where the mesh has only centres.

    Attributes
    ----------
    points : (n_points, 1 to 3) float64
    kind : (n_cells,) uint8
    indptr, indices : CSR
        Points of each cell.
    polyhedra : Polyhedra or None
    """

    points: FloatArray
    kind: KindArray
    indptr: Int64Array
    indices: IntArray
    polyhedra: Polyhedra | None = None

    def coordinates(self, rows: IntArray) -> FloatArray:
        """Return points with three columns, zero where there are fewer."""
        if self.points.shape[1] == 3:
            return self.points[rows]
        padded = np.zeros((len(rows), 3), COORDINATE)
        padded[:, : self.points.shape[1]] = self.points[rows]
        return padded


@dataclass(frozen=True, eq=False)
class Renumbered:
    """Rows of several parts with items numbered within each part.

    Attributes
    ----------
    entry_indptr : (k + 1,) int64
        Entries of each part.
    entries : (sum,) int32 or int64
        Local item numbers.
    offsets : (n_rows + k,) int32 or int64
        For each part one more than it has rows, from 0.
    used_indptr : (k + 1,) int64
    used : (sum,) int32 or int64
        Global number of each local item.
    """

    entry_indptr: Int64Array
    entries: IntArray
    offsets: IntArray
    used_indptr: Int64Array
    used: IntArray


@dataclass(frozen=True, eq=False)
class _Relation:
    """Rows of items in CSR form, with the row width if all rows are equally long, else -1."""

    indptr: Int64Array
    indices: IntArray
    n_items: int
    width: int

    @classmethod
    def of(cls, indptr: Int64Array, indices: IntArray, n_items: int) -> _Relation:
        """Find the width, a stretch of rows at a time."""
        n_rows = len(indptr) - 1
        width = int(indptr[1]) if n_rows else 0
        stretches = (indptr[at : at + _STRIDE + 1] for at in range(0, n_rows, _STRIDE))
        if not all(bool(np.all(np.diff(rows) == width)) for rows in stretches):
            width = -1
        return cls(indptr, indices, n_items, width)

    def entries_before(self, row_indptr: Int64Array, rows: IntArray) -> Int64Array:
        """Return how many entries the rows of all earlier parts have, (k + 1,)."""
        if self.width >= 0:
            return row_indptr * self.width
        before = np.zeros(len(rows) + 1, OFFSET)
        np.cumsum(self.indptr[rows + 1] - self.indptr[rows], out=before[1:])
        return before[row_indptr]


@dataclass(frozen=True, eq=False)
class Block:
    """The local meshes of consecutive parts.

    Attributes
    ----------
    first : int
        The first part; there are k.
    cell_indptr : (k + 1,) int64
    cells : (sum,) int32 or int64
        Cells of each part: owned in curve order, then halo.
    ghost : (sum,) uint8
        0 for owned cells, `GHOST` for halo cells.
    points : Renumbered
        Cells to points.
    faces, face_points : Renumbered or None
        Polyhedra to faces and these to points.
    """

    first: int
    cell_indptr: Int64Array
    cells: IntArray
    ghost: KindArray
    points: Renumbered
    faces: Renumbered | None
    face_points: Renumbered | None

    @property
    def n_parts(self) -> int:
        """Number of parts in the block."""
        return len(self.cell_indptr) - 1


def drawing_of(mesh: Mesh) -> Drawing:
    """Return a mesh with points: its own, or one vertex at each cell centre.

    Examples
    --------
    >>> from types import SimpleNamespace
    >>> drawing_of(SimpleNamespace(points=None, centers=np.zeros((2, 3)))).kind.tolist()
    [1, 1]
    """
    if mesh.points is not None:
        return Drawing(mesh.points, mesh.kind, mesh.indptr, mesh.indices, mesh.polyhedra)
    n_cells = len(mesh.centers)
    return Drawing(
        points=mesh.centers,
        kind=np.full(n_cells, VERTEX, KIND),
        indptr=np.arange(n_cells + 1, dtype=OFFSET),
        indices=np.arange(n_cells, dtype=index_dtype(n_cells)),
    )


def check_same_cells(drawing: Drawing, partition: Partition, halo: Halo) -> None:
    """Check that mesh, partition and exchange lists belong together.

    Raises
    ------
    PartitionError
        If their numbers of cells or parts differ.
    """
    counts = {
        "mesh": len(drawing.kind),
        "partition": partition.n_cells,
        "exchange lists": halo.n_cells,
    }
    if len(set(counts.values())) > 1:
        found = ", ".join(f"{what} {count}" for what, count in counts.items())
        raise PartitionError(f"numbers of cells differ: {found}; wanted all of the same mesh")
    if partition.n_parts != halo.n_parts:
        raise PartitionError(
            f"the partition has {partition.n_parts} parts and the exchange lists {halo.n_parts}; "
            "wanted lists of this partition"
        )


def blocks(drawing: Drawing, halo: Halo, *, block_cells: int = BLOCK_CELLS) -> Iterator[Block]:
    """Yield the local meshes of all parts in order, a block of parts at a time.

    Parameters
    ----------
    drawing : Drawing
    halo : Halo
    block_cells : int, optional
        A block stops before the part that would take it above this many cells.
    """
    end = halo.owned_indptr + halo.halo_indptr
    relations = _relations(drawing)
    first = 0
    while first < halo.n_parts:
        fits = int(np.searchsorted(end, end[first] + block_cells, side="right")) - 1
        last = max(first + 1, min(fits, halo.n_parts))
        yield _block(relations, halo, first, last)
        first = last


def _relations(drawing: Drawing) -> list[_Relation]:
    """Return cells to points and, of polyhedra, cells to faces and faces to points."""
    n_points, solid = len(drawing.points), drawing.polyhedra
    relations = [_Relation.of(drawing.indptr, drawing.indices, n_points)]
    if solid is not None:
        n_faces = len(solid.face_indptr) - 1
        relations.append(_Relation.of(solid.cell_indptr, solid.cell_indices, n_faces))
        relations.append(_Relation.of(solid.face_indptr, solid.face_indices, n_points))
    return relations


def _block(relations: list[_Relation], halo: Halo, first: int, last: int) -> Block:
    """Build the local meshes of parts `first` to `last - 1`."""
    parts = range(first, last)
    lists = [rows for part in parts for rows in (halo.owned_cells(part), halo.halo_cells(part))]
    cells = np.concatenate(lists)
    flags = np.tile(np.array([0, GHOST], KIND), len(parts))
    ghost = np.repeat(flags, [len(rows) for rows in lists])
    end = (halo.owned_indptr + halo.halo_indptr)[first : last + 1]
    cell_indptr = end - end[0]
    points = _renumber(cell_indptr, cells, relations[0], None)
    faces = face_points = None
    if len(relations) > 1:
        faces = _renumber(cell_indptr, cells, relations[1], None)
        seed = (points.used_indptr, points.used)
        face_points = _renumber(faces.used_indptr, faces.used, relations[2], seed)
    return Block(first, cell_indptr, cells, ghost, points, faces, face_points)


def _renumber(
    row_indptr: Int64Array, rows: IntArray, relation: _Relation, seed: _Lists | None
) -> Renumbered:
    """Give the items of some rows numbers within each part."""
    from sfcpart.kernels.pieces import number_locally

    n_parts = len(row_indptr) - 1
    if seed is None:
        seed = np.zeros(n_parts + 1, OFFSET), np.empty(0, relation.indices.dtype)
    entry_indptr = relation.entries_before(row_indptr, rows)
    n_entries = int(entry_indptr[-1])
    dtype = index_dtype(n_entries + len(seed[1]))
    entries, offsets = np.empty(n_entries, dtype), np.empty(len(rows) + n_parts, dtype)
    used, used_count = np.empty(n_entries, relation.indices.dtype), np.zeros(n_parts, OFFSET)
    into = (entry_indptr, entries, offsets, used, used_count)
    of = (row_indptr, rows, relation.indptr, relation.indices, relation.n_items)
    run_ranges(number_locally, n_parts, *of, *seed, *into, smallest=1)
    used_indptr = np.concatenate([[0], np.cumsum(used_count)]).astype(OFFSET)
    return Renumbered(
        entry_indptr, entries, offsets, used_indptr, _compact(used, entry_indptr, used_count)
    )


def _compact(used: IntArray, entry_indptr: Int64Array, count: Int64Array) -> IntArray:
    """Close the gaps between the used items of the parts."""
    return np.concatenate(
        [used[start : start + n] for start, n in zip(entry_indptr[:-1], count, strict=True)]
    )
