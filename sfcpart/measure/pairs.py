"""Which parts meet, in how many faces, and how many cells they exchange there.

Cost: one pass over the cells with cut faces, linear in cut faces; no sort of faces.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array, IntArray
from sfcpart.kernels.measure import find_pairs

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
        """Find the pairs from the cut faces of each cell and of each part."""
        n_parts = len(part_cut)
        start = np.zeros(n_parts + 1, np.int64)
        np.cumsum(part_cut, out=start[1:])
        capacity = int(np.minimum(part_cut, n_parts - 1).sum())
        edge_cells = np.flatnonzero(cut_count)
        part, other, faces, sent = find_pairs(
            edge_cells, indptr, indices, cell_part, start, capacity
        )
        order = np.lexsort((other, part))
        part, other, faces, sent = part[order], other[order], faces[order], sent[order]
        # Sorted by (other, part), row k is the reverse of pair k: the pairs are symmetric.
        return cls(part, other, faces, sent, sent[np.lexsort((part, other))])
