"""Which parts meet, in how many faces, and how many cells they exchange there.

Cost: one pass over the cells with cut faces, linear in cut faces; no sort of faces. Over ranks the
pairs of each go to the ranks that own the parts: 32 bytes a pair and 24 back.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.dtypes import PART, Int32Array, Int64Array, IntArray
from sfcpart.kernels.measure import find_pairs
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.routing import block_bounds, dealing, gather_rows, owner_of

__all__ = ["PartPairs"]


@dataclass(frozen=True, eq=False)
class PartPairs:
    """Ordered pairs of parts that share a face, sorted by part, then neighbour.

    Attributes
    ----------
    part, neighbour : (n_pairs,) int32
        Each unordered pair appears in both orders.
    faces : (n_pairs,) int64
        Faces the two share.
    sent_cells : (n_pairs,) int64
        Distinct cells of `part` that share a face with `neighbour`.
    received_cells : (n_pairs,) int64
        Distinct cells of `neighbour` that share a face with `part`.
    """

    part: Int32Array
    neighbour: Int32Array
    faces: Int64Array
    sent_cells: Int64Array
    received_cells: Int64Array

    @classmethod
    def from_cuts(
        cls,
        cut_count: Int32Array,
        part_cut: Int64Array,
        *,
        indptr: Int64Array,
        indices: IntArray,
        cell_part: Int32Array,
    ) -> PartPairs:
        """Find the pairs of a whole mesh from the cut faces of each cell and of each part."""
        n_parts = len(part_cut)
        rows = _find(cut_count, part_cut, indptr, indices, cell_part)
        return cls._joined(rows, n_parts, SerialComm())

    @classmethod
    def of_slices(
        cls, graph: GraphSlice, all_part: Int32Array, cut_count: Int32Array, n_parts: int
    ) -> PartPairs:
        """Find the pairs of the parts that this rank owns, from the cells of all (collective).

        Parts are owned in blocks of consecutive numbers. `all_part` is by cell, ghosts included.
        """
        n = graph.n_local
        part_cut = np.bincount(all_part[:n], weights=cut_count, minlength=n_parts)
        cut_faces = part_cut.astype(np.int64)
        rows = _find(cut_count, cut_faces, graph.indptr, graph.indices, all_part)
        return cls._joined(rows, n_parts, graph.comm)

    @classmethod
    def _joined(cls, rows: Int64Array, n_parts: int, comm: Comm) -> PartPairs:
        """Bring (part, neighbour, faces, cells) to the owner of the part; add up equal pairs."""
        first = block_bounds(n_parts, comm.size)
        pair = _added_up(dealing(comm, owner_of(rows[:, 0], first)).forward(rows))
        # The pairs are symmetric: the cells of the reverse pair are those received.
        back = dealing(comm, owner_of(pair[:, 1], first)).forward(pair[:, [1, 0, 3]])
        received = back[np.lexsort((back[:, 1], back[:, 0])), 2]
        part, neighbour = pair[:, :2].T.astype(PART)
        faces, sent = np.ascontiguousarray(pair[:, 2:].T)
        return cls(part, neighbour, faces, sent, received)

    def gathered(self, comm: Comm) -> PartPairs | None:
        """Bring the pairs of all ranks to rank 0; None on the others (collective)."""
        columns = [gather_rows(comm, column) for column in vars(self).values()]
        return None if comm.rank else PartPairs(*columns)


def _find(
    cut_count: Int32Array,
    part_cut: Int64Array,
    indptr: Int64Array,
    indices: IntArray,
    cell_part: Int32Array,
) -> Int64Array:
    """Return (part, neighbour, faces, cells of the part) of the pairs met at some cells."""
    start = np.zeros(len(part_cut) + 1, np.int64)
    np.cumsum(part_cut, out=start[1:])
    capacity = int(np.minimum(part_cut, len(part_cut) - 1).sum())
    edge_cells = np.flatnonzero(cut_count)
    return np.stack(find_pairs(edge_cells, indptr, indices, cell_part, start, capacity), axis=1)


def _added_up(rows: Int64Array) -> Int64Array:
    """Sort rows by part and neighbour; add up those of equal ones."""
    rows = rows[np.lexsort((rows[:, 1], rows[:, 0]))]
    begins = np.ones(len(rows), np.bool_)
    begins[1:] = (rows[1:, :2] != rows[:-1, :2]).any(axis=1)
    if begins.all():
        return rows
    start = np.flatnonzero(begins)
    return np.concatenate([rows[start, :2], np.add.reduceat(rows[:, 2:], start, axis=0)], axis=1)
