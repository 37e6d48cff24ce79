"""Cut a mesh into the local meshes of its parts, a few parts at a time.

What: for each part its owned cells in curve order, then its halo cells, with points numbered
locally by first use; what the writers of VTKHDF and VTU put into files.
How: a rank asks the ranks that hold the cells for those of a block of its own parts
(`sfcpart.files.parts.supply`), and one compiled pass renumbers them (`sfcpart.kernels.pieces`); a
block holds about a quarter of a million cells, so that memory stays bounded.
Cost: O(entries) time; O(block) memory.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import GID, KIND, OFFSET, Int64Array, IntArray, KindArray, index_dtype
from sfcpart.errors import PartitionError
from sfcpart.files.parts.supply import CellRows, Relation, Supply
from sfcpart.kernels.threads import run_ranges
from sfcpart.slices.routing import compact

if TYPE_CHECKING:
    from collections.abc import Iterator

    from sfcpart.halo import Halo
    from sfcpart.partition import Partition
    from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["GHOST", "POLYHEDRON", "Block", "Renumbered", "blocks", "check_same_cells"]

BLOCK_CELLS = 1 << 18
"""Cells in one block: 2^18 hexahedra take about 40 MB while they are fetched and renumbered."""
GHOST = 1
"""`vtkGhostType` of a cell that another part owns (bit 1: duplicate cell)."""
POLYHEDRON = 42
_STRIDE = 1 << 20
_Lists = tuple[Int64Array, IntArray]


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
        Slot of each local item (`sfcpart.files.parts.supply`).
    """

    entry_indptr: Int64Array
    entries: IntArray
    offsets: IntArray
    used_indptr: Int64Array
    used: IntArray


@dataclass(frozen=True, eq=False)
class Block:
    """The local meshes of consecutive parts; none where other ranks have more blocks than this.

    Attributes
    ----------
    cell_indptr : (k + 1,) int64
    cell_gid : (sum,) int64
        Cells of each part: owned in curve order, then halo.
    ghost : (sum,) uint8
        0 for owned cells, `GHOST` for halo cells.
    row : (sum,) int32
        Which of `cells` each of them is: a cell may occur in several parts.
    cells : CellRows
        What is known about them.
    points : Renumbered
        Cells to points.
    faces, face_points : Renumbered or None
        Polyhedra to faces and these to points.
    """

    cell_indptr: Int64Array
    cell_gid: Int64Array
    ghost: KindArray
    row: IntArray
    cells: CellRows
    points: Renumbered
    faces: Renumbered | None
    face_points: Renumbered | None

    @property
    def n_parts(self) -> int:
        """Number of parts in the block."""
        return len(self.cell_indptr) - 1


def check_same_cells(held: MeshSlice, partition: Partition, halo: Halo) -> None:
    """Check that mesh, partition and exchange lists belong together.

    Raises
    ------
    PartitionError
        If their numbers of cells or parts differ.
    """
    n_owned, n_parts = held.comm.allreduce(np.array([len(halo.owned), halo.n_parts], GID))
    counts = {
        "mesh": held.n_local,
        "partition": partition.n_cells,
        "exchange lists": held.n_local + int(n_owned) - held.n_cells,
    }
    error = None
    if len(set(counts.values())) > 1:
        found = ", ".join(f"{what} {count}" for what, count in counts.items())
        error = PartitionError(f"numbers of cells differ: {found}; wanted all of the same mesh")
    elif partition.n_parts != n_parts:
        error = PartitionError(
            f"the partition has {partition.n_parts} parts and the exchange lists {n_parts}; "
            "wanted lists of this partition"
        )
    held.comm.check(error)


def blocks(supply: Supply, halo: Halo, *, block_cells: int = BLOCK_CELLS) -> Iterator[Block]:
    """Yield the local meshes of a rank's parts in order, a block of parts at a time (collective).

    Parameters
    ----------
    supply : Supply
    halo : Halo
        Of this rank's parts.
    block_cells : int, optional
        A block stops before the part that would take it above this many cells.
    """
    end = halo.owned_indptr + halo.halo_indptr
    n_parts, edges = halo.n_parts, [0]
    while edges[-1] < n_parts:
        first = edges[-1]
        fits = int(np.searchsorted(end, end[first] + block_cells, side="right")) - 1
        edges.append(max(first + 1, min(fits, n_parts)))
    most = int(supply.comm.allreduce(np.array([len(edges) - 1]), "max")[0])
    edges += [n_parts] * (most + 1 - len(edges))
    for first, last in pairwise(edges):
        yield _block(supply, halo, first, last)


def _block(supply: Supply, halo: Halo, first: int, last: int) -> Block:
    """Build the local meshes of this rank's parts `first` to `last - 1`."""
    lists = [rows for part in range(first, last) for rows in _cells_of(halo, part)]
    gid = np.concatenate([np.empty(0, GID), *lists])
    flags = np.tile(np.array([0, GHOST], KIND), last - first)
    ghost = np.repeat(flags, [len(rows) for rows in lists])
    end = (halo.owned_indptr + halo.halo_indptr)[first : last + 1]
    cell_indptr = end - end[0]
    asked, row = compact(gid)
    cells = supply.cell_rows(asked)
    slots, face_number, face_rows = cells.points.indices, None, None
    if cells.faces is not None and supply.faces is not None:
        face_number, lowest = supply.faces.same(cells.faces.indices)
        face_rows = supply.face_points(lowest)
        slots = np.concatenate([slots, face_rows.indices])
    number, slot = supply.points.same(slots)
    n_entries, n_points = len(cells.points.indices), len(slot)
    relation = _Rows.of(cells.points.indptr, number[:n_entries], n_points)
    points = _renumber(cell_indptr, row, relation, None)
    faces = face_points = None
    if face_rows is not None and cells.faces is not None and face_number is not None:
        to_faces = _Rows.of(cells.faces.indptr, face_number, len(face_rows.indptr) - 1)
        faces = _renumber(cell_indptr, row, to_faces, None)
        seed = (points.used_indptr, points.used)
        to_points = _Rows.of(face_rows.indptr, number[n_entries:], n_points)
        face_points = _renumber(faces.used_indptr, faces.used, to_points, seed)
    points = replace(points, used=slot[points.used])
    return Block(cell_indptr, gid, ghost, row, cells, points, faces, face_points)


def _cells_of(halo: Halo, part: int) -> tuple[IntArray, IntArray]:
    """Return the owned cells of the `part`-th part here, and its halo cells."""
    own, far = (indptr[part : part + 2] for indptr in (halo.owned_indptr, halo.halo_indptr))
    return halo.owned[own[0] : own[1]], halo.halo[far[0] : far[1]]


@dataclass(frozen=True, eq=False)
class _Rows(Relation):
    """A relation, with its number of items and the width of its rows, -1 if they differ."""

    n_items: int
    width: int

    @classmethod
    def of(cls, indptr: Int64Array, indices: IntArray, n_items: int) -> _Rows:
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


def _renumber(
    row_indptr: Int64Array, rows: IntArray, relation: _Rows, seed: _Lists | None
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
    rows = [used[start : start + n] for start, n in zip(entry_indptr[:-1], count, strict=True)]
    return np.concatenate([used[:0], *rows])
