"""Coarse vertices from the curve: successive vertices of one part become one, over ranks.

Vertices are numbered along the curve, so blocks of 2**bits successive numbers are compact; what a
block holds of one part (and of one home) is a coarse vertex. Nothing is matched: the blocks are the
same for any number of ranks, and a block that lies on several belongs to the rank of its first
vertex. The start is respected, since no coarse vertex lies in two parts.

Cost: one sort of the rank's labels and one pass over its rows; an exchange of the merged rows.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.kernels.graph.contract import group_members, merge_rows
from sfcpart.kernels.threads import run_ranges
from sfcpart.methods.smoothing.state import State
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice
from sfcpart.slices.routing import Dealing, dealing, owner_of

__all__ = ["BlockGraph"]


@dataclass(frozen=True, eq=False)
class BlockGraph:
    """The coarse graph of a state with its labels, and the way back.

    Attributes
    ----------
    fine, coarse : State
    cluster : (n,) int64
        For each of the rank's vertices, which of its clusters it is in: what the rank holds of a
        coarse vertex.
    at : (n_came,) int64
        The rank's coarse vertex of each cluster that came here by `way`.
    way : Dealing
    """

    fine: State
    coarse: State
    cluster: Int64Array
    at: Int64Array
    way: Dealing

    @classmethod
    def of(cls, state: State, bits: int) -> BlockGraph:
        """Merge what blocks of 2**bits vertices hold of each part and home (collective)."""
        graph, comm = state.graph, state.graph.comm
        block = ((graph.first + np.arange(graph.n)) >> bits) - (graph.first >> bits)
        first, cluster = _distinct(block, *_labels_of(state))
        kind = [block[first] + (graph.first >> bits), *(a[first] for a in _labels_of(state))]
        way = dealing(comm, owner_of(kind[0] << bits, graph.offset))
        came = [way.forward(values) for values in kind]
        chosen, at = _distinct(came[0] - (came[0].min() if len(came[0]) else 0), *came[1:])
        sizes = np.concatenate(comm.allgather(np.array([len(chosen)], np.int64)))
        number = way.back(np.cumsum(sizes)[comm.rank] - sizes[comm.rank] + at)
        rows = _at_home(way, _merged(graph, cluster, number), at, len(chosen))
        coarse = WeightedSlice.of_rows(comm, *rows, _summed(graph.vertex_weight, cluster, way, at))
        home: dict[str, Array] = {}
        if state.priced:
            price = _summed(state.home_price, cluster, way, at)
            home = {"home_part": came[2][chosen], "home_price": price}
        labels = State.of(coarse, came[1][chosen], state.capacity, **home)
        return cls(state, labels, cluster, at, way)

    def project(self) -> None:
        """Give the fine vertices the parts of their coarse ones."""
        part = self.way.back(self.coarse.own[self.at])[self.cluster]
        vertices = np.flatnonzero(part != self.fine.own)
        self.fine.move(vertices, part[vertices])


def _labels_of(state: State) -> tuple[Int32Array, ...]:
    """Return what all vertices of a coarse one share: the part, and the home."""
    return (state.own, state.home_part) if state.priced else (state.own,)


def _distinct(block: Int64Array, *labels: Int32Array) -> tuple[Int64Array, Int64Array]:
    """Number the distinct rows ascending; return the first of each, and the number of each row."""
    code = block
    for label in labels:
        code = code * (int(label.max(initial=0)) + 2) + label + 1
    _, first, number = np.unique(code, return_index=True, return_inverse=True)
    return first, number


def _summed(values: Int64Array, cluster: Int64Array, way: Dealing, at: Int64Array) -> Int64Array:
    """Add up values of vertices by coarse vertex."""
    here = np.zeros(int(cluster.max(initial=-1)) + 1, np.int64)
    np.add.at(here, cluster, values)
    summed = np.zeros(int(at.max(initial=-1)) + 1, np.int64)
    np.add.at(summed, at, way.forward(here))
    return summed


def _merged(
    graph: WeightedSlice, cluster: Int64Array, number: Int64Array
) -> tuple[Int64Array, Int64Array, Int64Array]:
    """Merge the rows of the rank's vertices by cluster; neighbours are numbers of coarse vertices.

    `number` is ascending, since clusters are numbered as their coarse vertices are.
    """
    n = len(number)
    ghost = graph.held(number[cluster])[graph.n :]
    place = np.minimum(np.searchsorted(number, ghost), max(0, n - 1))
    known = number[place] == ghost if n else np.zeros(len(ghost), np.bool_)
    others, other = np.unique(ghost[~known], return_inverse=True)
    place[~known] = n + other
    coarse_of = np.concatenate([cluster, place]).astype(np.int32)
    member_ptr, members = np.zeros(n + 1, np.int64), np.empty(graph.n, np.int32)
    group_members(coarse_of[: graph.n], member_ptr, members)
    room_ptr = np.concatenate(([0], np.cumsum(np.diff(graph.indptr)[members])))[member_ptr]
    index, width = np.empty(len(graph.indices), np.int32), np.empty(len(graph.indices), np.int64)
    n_entries = np.zeros(n + len(others), np.int64)
    run_ranges(
        merge_rows, n, member_ptr, members, coarse_of, *graph.rows, room_ptr, index, width,
        n_entries, smallest=1024,
    )  # fmt: skip
    ptr = np.concatenate(([0], np.cumsum(n_entries[:n])))
    entry = np.arange(ptr[-1]) + np.repeat(room_ptr[:-1] - ptr[:-1], n_entries[:n])
    return ptr, np.concatenate([number, others])[index[entry]], width[entry]


def _at_home(
    way: Dealing, rows: tuple[Int64Array, Int64Array, Int64Array], at: Int64Array, n: int
) -> tuple[Int64Array, Int64Array, Int64Array]:
    """Send rows of clusters to the ranks of their coarse vertices and merge them there."""
    ptr, entries, widths = rows
    came_ptr, entries = way.forward_ragged(ptr, entries)
    _, widths = way.forward_ragged(ptr, widths)
    row = np.repeat(at, np.diff(came_ptr))
    order = np.lexsort((entries, row))
    row, entries, widths = row[order], entries[order], widths[order]
    new = np.append(True, (np.diff(row) > 0) | (np.diff(entries) > 0))[: len(row)]
    total = np.concatenate(([0], np.cumsum(widths)))
    start = np.append(np.flatnonzero(new), len(row))
    ptr = np.searchsorted(row[new], np.arange(n + 1))
    return ptr.astype(np.int64), entries[new], np.diff(total[start])
