"""What one rank holds of an integer-weighted graph: consecutive vertices, and their neighbours.

Vertices are numbered globally (`gid`), each rank holds a stretch of them. Neighbours that other
ranks hold are ghosts: they are numbered after the rank's own, by gid, and `fetch` brings values of
theirs. With one rank there are none, and the slice is the graph.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from itertools import pairwise

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.dtypes import Array, Int32Array, Int64Array, IntArray
from sfcpart.methods.graph.coarsen import WeightedGraph

__all__ = ["WeightedSlice", "cut_by_rank"]


def cut_by_rank(array: Array, count: Int64Array) -> list[Array]:
    """Cut an array into `count[r]` rows for each rank."""
    edge = np.concatenate(([0], np.cumsum(count)))
    return [array[start:stop] for start, stop in pairwise(edge)]


@dataclass(frozen=True, eq=False)
class WeightedSlice:
    """A stretch of the vertices of a symmetric graph, integer weights on vertices and edges.

    Attributes
    ----------
    comm : Comm
    offset : (size + 1,) int64
        First gid of each rank's stretch; the last entry is the number of vertices.
    indptr : (n + 1,) int64
    indices : (n_entries,) int32
        Local numbers of the neighbours; ghosts follow the rank's own vertices.
    edge_weight : (n_entries,) int64, > 0
    vertex_weight : (n,) int64, >= 0
    ghost_gid : (n_ghosts,) int64, ascending
    ghost_count : (size,) int64
        How many of the ghosts each rank holds.
    shown : (n_shown,) int32
        This rank's vertices that others have as ghosts, by rank.
    shown_count : (size,) int64
    """

    comm: Comm
    offset: Int64Array
    indptr: Int64Array
    indices: Int32Array
    edge_weight: Int64Array
    vertex_weight: Int64Array
    ghost_gid: Int64Array
    ghost_count: Int64Array
    shown: Int32Array
    shown_count: Int64Array

    @classmethod
    def of_graph(cls, graph: WeightedGraph) -> WeightedSlice:
        """Hold the whole graph on one rank; nothing is copied."""
        none = np.zeros(1, np.int64)
        return cls(
            SerialComm(), np.array([0, graph.n], np.int64), graph.indptr, graph.indices,
            graph.edge_weight, graph.vertex_weight, none[:0], none, np.empty(0, np.int32), none,
        )  # fmt: skip

    @classmethod
    def of_rows(
        cls,
        comm: Comm,
        indptr: Int64Array,
        neighbour_gid: IntArray,
        edge_weight: Int64Array,
        vertex_weight: Int64Array,
    ) -> WeightedSlice:
        """Number the neighbours locally and agree on who shows what to whom (collective).

        Two vertices may share several edges; then both rows have an entry for each.
        """
        n = len(vertex_weight)
        sizes = np.concatenate(comm.allgather(np.array([n], np.int64)))
        offset = np.concatenate(([0], np.cumsum(sizes)))
        first = int(offset[comm.rank])
        indices = (neighbour_gid - first).astype(np.int32)  # those of other ranks follow
        foreign = np.flatnonzero((neighbour_gid < first) | (neighbour_gid >= first + n))
        ghost_gid, place = np.unique(neighbour_gid[foreign].astype(np.int64), return_inverse=True)
        indices[foreign] = n + place
        owner = np.searchsorted(offset, ghost_gid, side="right") - 1
        ghost_count = np.bincount(owner, minlength=comm.size).astype(np.int64)
        asked = comm.alltoall(cut_by_rank(ghost_gid, ghost_count))
        shown = (np.concatenate(asked) - first).astype(np.int32)
        return cls(
            comm, offset, indptr, indices, edge_weight, vertex_weight, ghost_gid,
            ghost_count, shown, np.array([len(rows) for rows in asked], np.int64),
        )  # fmt: skip

    @property
    def n(self) -> int:
        """Vertices of this rank."""
        return len(self.vertex_weight)

    @property
    def n_held(self) -> int:
        """Vertices of this rank and ghosts."""
        return len(self.vertex_weight) + len(self.ghost_gid)

    @property
    def n_total(self) -> int:
        """Vertices of all ranks."""
        return int(self.offset[-1])

    @property
    def first(self) -> int:
        """Gid of this rank's first vertex."""
        return int(self.offset[self.comm.rank])

    @property
    def gid(self) -> Int64Array:
        """Gids of what is held, (n_held,)."""
        return np.concatenate([self.first + np.arange(self.n), self.ghost_gid])

    @property
    def rows(self) -> tuple[Int64Array, Int32Array, Int64Array]:
        """The arrays of the edges, as kernels take them."""
        return self.indptr, self.indices, self.edge_weight

    @property
    def rim(self) -> Int32Array:
        """The rank's vertices next to ghosts, ascending."""
        beside = self.indices >= self.n if len(self.ghost_gid) else np.zeros(0, np.bool_)
        entry = np.flatnonzero(beside)
        return np.unique(np.searchsorted(self.indptr, entry, side="right") - 1).astype(np.int32)

    def fetch(self, held: Array) -> None:
        """Bring the ghosts' values up to date in an array with a value for all that is held."""
        held[self.n :] = self.swap(held[self.shown])

    def swap(self, shown_values: Array) -> Array:
        """Return values of the ghosts, given those of what this rank shows."""
        return np.concatenate(self.comm.alltoall(cut_by_rank(shown_values, self.shown_count)))

    def held(self, values: Array) -> Array:
        """Return this rank's values followed by those of the ghosts."""
        array = np.empty((self.n_held, *values.shape[1:]), values.dtype)
        array[: self.n] = values
        self.fetch(array)
        return array

    def without_edges_between(self, label: Array) -> WeightedSlice:
        """Return the slice without the edges between different labels, (n_held,)."""
        row = np.repeat(label[: self.n], np.diff(self.indptr))
        keep = row == label[self.indices]
        kept = np.concatenate(([0], np.cumsum(keep)))
        return replace(
            self,
            indptr=kept[self.indptr],
            indices=self.indices[keep],
            edge_weight=self.edge_weight[keep],
        )

    def sum_by(self, label: Array, values: Int64Array, size: int) -> Int64Array:
        """Add up values by label over all ranks, (size,) int64."""
        summed = np.zeros(size, np.int64)
        np.add.at(summed, label, values)
        return self.comm.allreduce(summed)
