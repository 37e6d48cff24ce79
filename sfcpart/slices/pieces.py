"""Pieces: cells of one part that hang together across faces, over ranks.

How: each rank joins its own cells (`kernels.join`); the pieces that touch other ranks are linked
with the pieces there (`linking`).
Cost: O(entries) on each rank; what `linking` costs for the pieces on the border of the rank, and
16 bytes a ghost.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import cast

import numpy as np

from sfcpart.dtypes import PART, Int32Array, Int64Array, index_dtype
from sfcpart.kernels.threads import ranges, run_ranges
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.linking import lowest_linked
from sfcpart.slices.routing import dealing, owner_of

__all__ = ["Pieces", "find_pieces", "number_pieces"]


@dataclass(frozen=True, eq=False)
class Pieces:
    """The pieces that have cells on this rank.

    Attributes
    ----------
    root : (n_local,) int32
        Lowest cell of this rank that each cell hangs together with on this rank.
    size : (n_local,) int32
        Cells of this rank that have it as their root.
    border : (n_border,) int64, ascending
        Roots of pieces that touch other ranks.
    border_lowest : (n_border,) int64
        Global number of the lowest cell of these pieces on all ranks.
    """

    root: Int32Array
    size: Int32Array
    border: Int64Array
    border_lowest: Int64Array

    def lowest(self, graph: GraphSlice) -> Int64Array:
        """Return the global number of the lowest cell of each cell's piece, (n_local,) int64."""
        lowest = np.arange(graph.first_gid, graph.first_gid + graph.n_local)
        lowest[self.border] = self.border_lowest
        return lowest[self.root]

    def counted(self, graph: GraphSlice) -> tuple[Int64Array, Int64Array]:
        """Return the pieces whose lowest cell is here: that cell, and cells on all ranks.

        Returns
        -------
        cell : (n,) int64, ascending
            Local number.
        size : (n,) int64
        """
        cells = self.size.astype(np.int64)
        foreign = self.border_lowest != graph.first_gid + self.border
        lowest, moved = self.border_lowest[foreign], self.border[foreign]
        way = dealing(graph.comm, owner_of(lowest, graph.rank_first))
        came = way.forward(np.stack([lowest, cells[moved]], axis=1))
        cells[moved] = 0
        np.add.at(cells, came[:, 0] - graph.first_gid, came[:, 1])
        cell = np.flatnonzero(cells)
        return cell, cells[cell]


def find_pieces(graph: GraphSlice, cell_part: Int32Array) -> Pieces:
    """Find the pieces of parts (collective).

    Parameters
    ----------
    graph : GraphSlice
    cell_part : (n_local + n_ghost,) int32
        Only cells of one part hang together.

    Returns
    -------
    Pieces

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.mesh.mesh import Mesh
    >>> from sfcpart.slices.graph_slice import graph_slice
    >>> from sfcpart.slices.mesh_slice import cut_mesh
    >>> row = Mesh.from_faces([[0, 1], [1, 2]], [1, 1], [[0, 0], [1, 0], [2, 0]], [1, 1, 1])
    >>> def act(comm):
    ...     graph = graph_slice(cut_mesh(row, comm))
    ...     part = graph.extend(np.array([[0], [0, 1]][comm.rank], np.int32))
    ...     return find_pieces(graph, part).lowest(graph).tolist()
    >>> run_ranks(2, act)
    [[0], [0, 2]]
    """
    root, size = _join_here(graph, cell_part)
    own, other = _border_links(graph, cell_part, root)
    border, one = np.unique(own, return_inverse=True)
    lowest = lowest_linked(
        graph.first_gid + border, one.reshape(-1), other, first=graph.rank_first, comm=graph.comm
    )
    return Pieces(root, size, border.astype(np.int64), lowest)


def _join_here(graph: GraphSlice, cell_part: Int32Array) -> tuple[Int32Array, Int32Array]:
    """Join the cells of this rank; return root and size."""
    from sfcpart.kernels.join import count_joined, join_across, join_inside

    n, indptr, indices = graph.n_local, graph.indptr, graph.indices
    cell_part = cell_part.view()
    cell_part.flags.writeable = False  # one array type, so that kernels compile once
    parent = np.empty(n, np.int32)
    run_ranges(join_inside, n, indptr, indices, cell_part, parent)
    starts = [start for start, _ in ranges(n)]
    join_across(np.array([*starts, n], np.int64), indptr, indices, cell_part, parent)
    size = np.zeros(n, np.int32)
    count_joined(parent, size)
    return parent, size


def _border_links(
    graph: GraphSlice, cell_part: Int32Array, root: Int32Array
) -> tuple[Int64Array, Int64Array]:
    """Return roots that touch other ranks, with the root (global number) on the other side."""
    far_root = graph.fetch(graph.first_gid + root.astype(np.int64))
    entry = np.flatnonzero(graph.indices >= graph.n_local) if graph.n_ghost else np.zeros(0, int)
    cell = np.searchsorted(graph.indptr, entry, side="right") - 1
    ghost = graph.indices[entry]
    joined = cell_part[cell] == cell_part[ghost]
    links = np.stack([root[cell[joined]], far_root[ghost[joined] - graph.n_local]], axis=1)
    own, other = np.unique(links, axis=0).T
    return own, np.ascontiguousarray(other)


def number_pieces(graph: GraphSlice) -> tuple[int, Int32Array]:
    """Number the connected components by their lowest cells (collective).

    Parameters
    ----------
    graph : GraphSlice

    Returns
    -------
    count : int
    label : (n_local,) int32 (int64 for 2**31 or more of them)

    Examples
    --------
    >>> from sfcpart.graph import cell_graph
    >>> from sfcpart.mesh.mesh import Mesh
    >>> mesh = Mesh.from_faces([[0, 2]], [1.0], [[0, 0], [5, 0], [1, 0]], [1.0] * 3)
    >>> count, label = number_pieces(GraphSlice.whole(cell_graph(mesh)))
    >>> count, label.tolist()
    (2, [0, 1, 0])
    """
    comm = graph.comm
    pieces = find_pieces(graph, np.zeros(graph.n_local + graph.n_ghost, PART))
    is_first = pieces.size > 0
    is_first[pieces.border] = pieces.border_lowest == graph.first_gid + pieces.border
    number = np.cumsum(is_first) - 1
    here = np.array([np.count_nonzero(is_first)], np.int64)
    number += int(comm.exscan(here)[0])
    count = int(comm.allreduce(here)[0])
    way = dealing(comm, owner_of(pieces.border_lowest, graph.rank_first))
    asked = way.forward(pieces.border_lowest) - graph.first_gid
    number[pieces.border] = way.back(number[asked])
    numbered = number.astype(index_dtype(count))[pieces.root]
    return count, cast(Int32Array, numbered)
