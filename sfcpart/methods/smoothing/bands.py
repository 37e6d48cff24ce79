"""Bands around the borders of pairs of parts: marked by all ranks, solved by one rank each."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.kernels.graph.bands import (
    SHARES,
    grow_layer,
    number_bands,
    pack_bands,
    pull_layer,
    start_bands,
)
from sfcpart.kernels.graph.place_border import place_borders
from sfcpart.kernels.graph.shed_border import shed_borders
from sfcpart.kernels.threads import run_ranges
from sfcpart.methods.graph.labels import by_part
from sfcpart.methods.smoothing.state import State
from sfcpart.methods.smoothing.weighted_slice import cut_by_rank

__all__ = ["Bands"]

DEPTH = 3
"""Layers beyond the boundary vertices; 4 cost 1.2 times as much and cut 1 % less."""

STRETCH = 7.0
"""A band weighs up to this many times what the other part has room for."""


@dataclass(frozen=True, eq=False)
class Bands:
    """Scratch for the bands of this rank's vertices, used again for every group of pairs.

    Attributes
    ----------
    state : State
    layer, slot : (n_held,) int8, int32
        Steps from the other part, and number in the band of the pair; -1 between groups.
    band : (n,) int32
    size : (n_parts,) int64
        How many vertices of each part this rank holds.
    host : (n_parts,) int64
        Rank that solves the pairs of which a part is the first: the one that holds most of it.
    rim : (n_rim,) int32
        This rank's vertices next to ghosts.
    shift : int
        So many bits of a gid are dropped to choose the share of a layer: neighbours on the curve
        fall into one.
    """

    state: State
    layer: Array
    slot: Int32Array
    band: Int32Array
    size: Int64Array
    host: Int64Array
    rim: Int32Array
    shift: int

    @classmethod
    def of(cls, state: State) -> Bands:
        """Make the scratch and choose hosts (collective)."""
        graph, k = state.graph, state.n_parts
        comm = graph.comm
        size = np.bincount(state.own, minlength=k).astype(np.int64)
        rank = comm.allreduce(size * comm.size + (comm.size - 1 - comm.rank), "max")
        return cls(
            state,
            np.full(graph.n_held, -1, np.int8),
            np.full(graph.n_held, -1, np.int32),
            np.empty(graph.n, np.int32),
            size,
            comm.size - 1 - rank % comm.size,
            graph.rim,
            max(0, (graph.n_total // max(1, 2 * SHARES * k)).bit_length() - 1),
        )

    def fringe(self) -> tuple[Int32Array, Int64Array]:
        """Return the boundary vertices by part, and the offsets of the parts."""
        return by_part(self.state.boundary(), self.state.own, self.state.n_parts)

    def place(self, pairs: Int32Array, fringe: tuple[Int32Array, Int64Array]) -> Int64Array:
        """Put the borders of disjoint pairs, (m, 2), where they cut least; return the falls.

        A fall of -1 means that vertices moved at equal cost.
        """
        capacity = np.maximum(self.state.capacity, self.state.load)[pairs]
        return self._solve(place_borders, pairs, self._mark(pairs, fringe), capacity)

    def shed(self, pairs: Int32Array, capacity: Int64Array) -> Int64Array:
        """Move the excess of the first of each pair to the second; return the falls of the cost.

        `capacity` (m, 2) is what each may weigh afterwards. No part falls into pieces by it.
        """
        start, stop = self._mark(pairs, self.fringe())
        for p in pairs.ravel():  # by gid, so that ties do not depend on the ranks
            self.band[start[p] : stop[p]].sort()
        return self._solve(shed_borders, pairs, (start, stop), capacity)

    def _solve(
        self,
        kernel: Callable[..., None],
        pairs: Int32Array,
        lists: tuple[Int64Array, Int64Array],
        capacity: Int64Array,
    ) -> Int64Array:
        """Send bands to hosts, run a kernel there on all pairs, take over what it found."""
        state = self.state
        by_host = np.argsort(self.host[pairs[:, 0]], kind="stable")
        pairs, capacity = pairs[by_host], capacity[by_host]
        start, stop = lists
        vertices, parcel = self._packed(pairs, start, stop)
        where = self.host[pairs[:, 0]]
        load = state.load[pairs]
        side, gain = _solved(kernel, state.graph.comm, parcel, where, load, capacity)
        new = pairs.ravel()[2 * np.repeat(np.arange(len(pairs)), parcel.row_count) + side]
        self._clear(vertices)
        change = np.bincount(new, minlength=state.n_parts)
        change -= np.bincount(state.part[vertices], minlength=state.n_parts)
        self.size[:] += change
        state.part[vertices] = new
        state.load[pairs] = load
        state.graph.fetch(state.part)
        falls = np.empty_like(gain)
        falls[by_host] = gain
        return falls

    def _mark(
        self, pairs: Int32Array, fringe: tuple[Int32Array, Int64Array]
    ) -> tuple[Int64Array, Int64Array]:
        """List the bands of this rank's vertices part by part; return where the lists are."""
        graph, part = self.state.graph, self.state.part
        mate = np.full(self.state.n_parts, -1, np.int32)
        mate[pairs[:, 0]], mate[pairs[:, 1]] = pairs[:, 1], pairs[:, 0]
        sides = pairs.ravel()
        start = np.cumsum(self.size) - self.size
        layer_start, stop = start.copy(), start.copy()
        run_ranges(
            start_bands, len(sides), sides, mate, fringe[1], fringe[0], graph.indptr,
            graph.indices, part, self.layer, self.band, start, stop, smallest=1,
        )  # fmt: skip
        for depth in range(1, DEPTH + 1):
            graph.fetch(self.layer)
            run_ranges(
                grow_layer, len(sides), sides, graph.n, depth, graph.indptr, graph.indices, part,
                self.layer, self.band, layer_start, stop, smallest=1,
            )  # fmt: skip
            pull_layer(
                self.rim, mate, depth, graph.n, graph.indptr, graph.indices, part, self.layer,
                self.band, stop,
            )  # fmt: skip
        return start, stop

    def _packed(
        self, pairs: Int32Array, start: Int64Array, stop: Int64Array
    ) -> tuple[Int32Array, _Parcel]:
        """Number the bands over all ranks and pack this rank's rows; return the vertices, too."""
        state, graph, m = self.state, self.state.graph, len(pairs)
        count = (stop - start)[pairs].sum(axis=1)
        n_entries = np.zeros(m, np.int64)
        run_ranges(
            number_bands, m, pairs, self.band, start, stop, graph.indptr,
            graph.comm.exscan(count), self.slot, n_entries, smallest=1,
        )  # fmt: skip
        graph.fetch(self.slot)
        if len(state.home_part):
            n_entries += count
        row_ptr, entry_ptr = (np.cumsum(c) - c for c in (count, n_entries))
        n_rows, all_entries = int(count.sum()), int(n_entries.sum())
        vertices = np.empty(n_rows, np.int32)
        parcel = _Parcel(
            count, n_entries, np.empty(n_rows, np.int32), np.empty(n_rows, np.int32),
            np.empty(n_rows, np.int64), np.empty(all_entries, np.int32),
            np.empty(all_entries, np.int64),
        )  # fmt: skip
        run_ranges(
            pack_bands, m, pairs, self.band, start, stop, graph.indptr, graph.indices,
            graph.edge_weight, graph.vertex_weight, state.part, state.home_part,
            state.home_price, self.layer, self.slot, graph.first, self.shift, row_ptr, entry_ptr,
            vertices, *parcel.rows, smallest=1,
        )  # fmt: skip
        return vertices, parcel

    def _clear(self, vertices: Int32Array) -> None:
        """Unmark the bands."""
        for marks in (self.layer, self.slot):
            marks[vertices] = -1
            marks[self.state.graph.n :] = -1


@dataclass(frozen=True, eq=False)
class _Parcel:
    """Rows of bands, pair after pair (kernels.graph.bands.pack_bands)."""

    row_count: Int64Array
    entry_count: Int64Array
    row_length: Int32Array
    row_note: Int32Array
    row_weight: Int64Array
    entry_to: Int32Array
    entry_weight: Int64Array

    @property
    def counts(self) -> tuple[Int64Array, ...]:
        """How much of each of `rows` belongs to each pair."""
        return (self.row_count,) * 3 + (self.entry_count,) * 2

    @property
    def rows(self) -> tuple[Array, ...]:
        """What kernels write."""
        return (
            self.row_length, self.row_note, self.row_weight, self.entry_to, self.entry_weight,
        )  # fmt: skip


def _solved(
    kernel: Callable[..., None],
    comm: Comm,
    parcel: _Parcel,
    where: Int64Array,
    load: Int64Array,
    capacity: Int64Array,
) -> tuple[Array, Int64Array]:
    """Send rows to their hosts and solve; return the sides of the rows sent, and the falls.

    `load` (m, 2) becomes the new loads.
    """
    hosted = np.bincount(where, minlength=comm.size).astype(np.int64)
    counts = np.stack(comm.alltoall(cut_by_rank(parcel.row_count, hosted)))
    came = []
    for array, c in zip(parcel.rows, parcel.counts, strict=True):
        n = np.bincount(where, weights=c, minlength=comm.size).astype(np.int64)
        came.append(np.concatenate(comm.alltoall(cut_by_rank(array, n))))
    length, note, weight, entry_to, entry_weight = came
    mine = np.flatnonzero(where == comm.rank)
    pair = np.repeat(np.tile(np.arange(len(mine), dtype=np.int32), comm.size), counts.ravel())
    row_at = np.argsort(pair, kind="stable").astype(np.int32)
    row_ptr = np.concatenate(([0], np.cumsum(counts.sum(axis=0))))
    row_first = np.concatenate(([0], np.cumsum(length, dtype=np.int64)))
    side = np.empty(len(note), np.int8)
    result = np.zeros((len(where), 3), np.int64)
    own_load = load[mine]
    gain = np.zeros(len(mine), np.int64)
    run_ranges(
        kernel, len(mine), row_ptr, row_at, row_first, note, weight, entry_to, entry_weight,
        own_load, capacity[mine], (DEPTH + 1) * SHARES, STRETCH, side, gain, smallest=1,
    )  # fmt: skip
    result[mine, :2], result[mine, 2] = own_load, gain
    result = comm.allreduce(result)
    load[:] = result[:, :2]
    back = comm.alltoall(cut_by_rank(side, counts.sum(axis=1)))
    return np.concatenate(back), result[:, 2]
