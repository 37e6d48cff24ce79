"""Where parts meet: the cut entries of a cell graph, block by block to stay small in memory."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from sfcpart.dtypes import Array, BoolArray, Int64Array
from sfcpart.graph import CellGraph

__all__ = ["cut_entries", "rim_cells", "touching_parts"]

_BLOCK = 1 << 19  # cells


def cut_entries(cell_part: Array, graph: CellGraph) -> Iterator[tuple[Array, Array]]:
    """Yield the two cells of entries between different parts, some at a time."""
    for first in range(0, graph.n_cells, _BLOCK):
        last = min(first + _BLOCK, graph.n_cells)
        ends = graph.indptr[first : last + 1]
        column = graph.indices[ends[0] : ends[-1]]
        row = np.repeat(np.arange(first, last), np.diff(ends))
        cut = cell_part[row] != cell_part[column]
        yield row[cut], column[cut]


def rim_cells(cell_part: Array, graph: CellGraph) -> BoolArray:
    """Mark cells with a boundary face or with a neighbour of another part, (n_cells,)."""
    is_rim: BoolArray = graph.boundary_count > 0
    for row, _ in cut_entries(cell_part, graph):
        is_rim[row] = True
    return is_rim


def touching_parts(cell_part: Array, graph: CellGraph, *, n_parts: int) -> list[Int64Array]:
    """Return the parts that each part shares a face with."""
    found = [
        np.unique(cell_part[row].astype(np.int64) * n_parts + cell_part[column])
        for row, column in cut_entries(cell_part, graph)
    ]
    pair = np.unique(np.concatenate(found)) if found else np.empty(0, np.int64)
    ends = np.searchsorted(pair // n_parts, np.arange(n_parts + 1))
    return [pair[ends[p] : ends[p + 1]] % n_parts for p in range(n_parts)]
