"""Parts in one piece, over ranks: small pieces go to the parts they touch most.

Every rank finds the pieces of its own vertices; names (the lowest gid) travel over the ghosts until
each piece has one name everywhere. The rank that holds a piece's name adds up its weight and its
links to the main pieces of other parts, and decides. What a part then weighs too much it sheds over
its border, vertex by vertex, where that leaves it in one piece.

A round costs about fifteen collectives and as many more as a piece winds from rank to rank.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import Array, BoolArray, Int32Array, Int64Array
from sfcpart.kernels.graph.slice_pieces import label_own_pieces
from sfcpart.methods.smoothing.bands import Bands
from sfcpart.methods.smoothing.borders import disjoint_groups, touching_pairs
from sfcpart.methods.smoothing.excess import steps_to_room
from sfcpart.methods.smoothing.queues import weight_before
from sfcpart.methods.smoothing.state import State
from sfcpart.slices.routing import Dealing, dealing, owner_of

__all__ = ["join_pieces", "shed_whole"]

ROUNDS = 8
FIT_ROUNDS = 2
SHED_ROUNDS = 12
FAR = np.iinfo(np.int64).max


def join_pieces(state: State) -> None:
    """Leave every part in its main piece, as far as the graph and the balance allow.

    The main piece is the heaviest (then the largest, then that of the lowest gid). If parts would
    weigh more above their capacities than before, all is left as it was.
    """
    before, overload = state.part.copy(), state.overload
    for turn in range(ROUNDS):
        n_small, n_moved = _give_away(state, fits_only=turn < FIT_ROUNDS)
        if n_small == 0 or (n_moved == 0 and turn >= FIT_ROUNDS):
            break
        shed_whole(state)
    if state.overload > overload:
        state.restore(before)


def shed_whole(state: State) -> None:
    """Shed excess over the borders to parts with room or nearer to it; parts stay in one piece."""
    for _ in range(SHED_ROUNDS):
        pairs, capacity = _outlets(state)
        if not len(pairs):
            return
        before = state.overload
        Bands.of(state).shed(pairs, capacity)
        if state.overload >= before and not (state.load < state.capacity).any():
            return


def _outlets(state: State) -> tuple[Int32Array, Int64Array]:
    """Pair overloaded parts with neighbours nearer to room, longest borders first, disjointly."""
    if state.overload == 0:
        return np.empty((0, 2), np.int32), np.empty((0, 2), np.int64)
    pairs, _ = touching_pairs(state)
    distance = steps_to_room(state, pairs)
    over = state.load > state.capacity
    both = np.concatenate([pairs, pairs[:, ::-1]])
    rank = np.tile(np.arange(len(pairs)), 2)
    keep = over[both[:, 0]] & (distance[both[:, 1]] < distance[both[:, 0]])
    both, rank = both[keep], rank[keep]
    room = np.maximum(state.capacity - state.load, 0)[both[:, 1]]
    order = np.lexsort((rank, -np.minimum(room, (state.load - state.capacity)[both[:, 0]])))
    groups = disjoint_groups(np.ascontiguousarray(both[order]), state.n_parts)
    if not groups:
        return both[:0], np.empty((0, 2), np.int64)
    chosen = groups[0]
    capacity = state.capacity[chosen]
    excess = (state.load - state.capacity)[chosen[:, 0]]
    full = state.load[chosen[:, 1]] >= capacity[:, 1]
    capacity[:, 1] = np.where(full, state.load[chosen[:, 1]] + excess, capacity[:, 1])
    return chosen, capacity


def _give_away(state: State, *, fits_only: bool) -> tuple[int, int]:
    """Give pieces to parts whose main pieces they touch; return how many there are, what moved.

    Parts with room come first; others take pieces only without `fits_only`.
    """
    found = _Pieces.of(state)
    main_name = found.main_names()
    is_main = main_name[found.part] == found.name
    n_small = int(state.graph.comm.allreduce(np.array([(~is_main).sum()], np.int64))[0])
    if n_small == 0:
        return 0, 0
    target = found.targets(is_main, fits_only=fits_only)
    vertices = np.flatnonzero(target[found.piece] >= 0)
    state.move(vertices, target[found.piece[vertices]])
    return n_small, int(state.graph.comm.allreduce(np.array([len(vertices)], np.int64))[0])


@dataclass(frozen=True, eq=False)
class _Pieces:
    """Pieces of this rank's own vertices, with names that hold on all ranks.

    `piece` (n,) int32 numbers them, `part`, `name` (n_pieces,) tell whose they are; `way` leads to
    the ranks that hold the names, where `at` numbers the different ones.
    """

    state: State
    piece: Int32Array
    part: Int32Array
    name: Int64Array
    way: Dealing
    at: Int64Array
    known: Int64Array

    @classmethod
    def of(cls, state: State) -> _Pieces:
        """Find the pieces and name them (collective)."""
        graph = state.graph
        piece, first = np.empty(graph.n, np.int32), np.empty(graph.n, np.int32)
        count = label_own_pieces(graph.n, graph.indptr, graph.indices, state.part, piece, first)
        own_first = first[:count]
        name = _names(state, piece, graph.first + own_first.astype(np.int64))
        way = dealing(graph.comm, owner_of(name, graph.offset))
        known, at = np.unique(way.forward(name), return_inverse=True)
        return cls(state, piece, state.part[own_first], name, way, at, known)

    def _sum(self, values: Int64Array) -> Int64Array:
        """Add up a value of local pieces by name, where the names are held."""
        summed = np.zeros(len(self.known), np.int64)
        np.add.at(summed, self.at, self.way.forward(values))
        return summed

    def _of_pieces(self, values: Int64Array) -> Int64Array:
        """Add up a value of vertices by local piece."""
        summed = np.zeros(len(self.name), np.int64)
        np.add.at(summed, self.piece, values)
        return summed

    def main_names(self) -> Int64Array:
        """Return the name of each part's main piece, (n_parts,); -1 for empty parts."""
        comm, k = self.state.graph.comm, self.state.n_parts
        weight = self._sum(self._of_pieces(self.state.graph.vertex_weight))
        size = self._sum(np.bincount(self.piece, minlength=len(self.name)))
        part = np.empty(len(self.known), np.int32)
        part[self.at] = self.way.forward(self.part)
        rows = np.arange(len(part))
        for values in (weight, size, FAR - self.known):
            best = np.full(k, -1, np.int64)
            np.maximum.at(best, part[rows], values[rows])
            best = comm.allreduce(best, "max")
            rows = rows[values[rows] == best[part[rows]]]
        return np.where(best >= 0, FAR - best, -1)

    def targets(self, is_main: BoolArray, *, fits_only: bool) -> Int32Array:
        """Return the part to which each local piece goes, -1 if it stays."""
        state, k = self.state, self.state.n_parts
        row, link = self._links(is_main)
        piece, part = row // k, row % k
        way = dealing(state.graph.comm, owner_of(self.name[piece], state.graph.offset))
        at = np.searchsorted(self.known, way.forward(self.name[piece]))
        code = at * k + way.forward(part)
        code, link = _added(code, way.forward(link))
        at, part = code // k, code % k
        weight = self._sum(self._of_pieces(state.graph.vertex_weight))
        room = (state.capacity - state.load)[part]
        fits = weight[at] <= room
        order = np.lexsort((part, -link, ~fits, at))
        order = order[np.append(True, np.diff(at[order]) > 0)] if len(order) else order
        at, part, fits = at[order], part[order], fits[order]
        before = weight_before(state.graph.comm, part, np.zeros(len(part), np.int64), weight[at], k)
        fits &= before + weight[at] <= (state.capacity - state.load)[part]
        goes = fits if fits_only else np.ones(len(fits), np.bool_)
        target = np.full(len(self.known), -1, np.int32)
        target[at[goes]] = part[goes]
        return np.asarray(self.way.back(target[self.at]), np.int32)

    def _links(self, is_main: BoolArray) -> tuple[Int64Array, Int64Array]:
        """Return links of small pieces to parts' main pieces: piece x n_parts + part, weight."""
        graph, part = self.state.graph, self.state.part
        main = graph.held(is_main[self.piece])
        small = np.flatnonzero(~main[: graph.n])
        degree = np.diff(graph.indptr)[small]
        first = np.repeat(graph.indptr[small] - np.cumsum(degree) + degree, degree)
        entry = first + np.arange(len(first))
        vertex, other = np.repeat(small, degree), graph.indices[entry]
        keep = main[other] & (part[other] != part[vertex])
        code = self.piece[vertex[keep]].astype(np.int64) * self.state.n_parts + part[other[keep]]
        return _added(code, graph.edge_weight[entry[keep]])


def _added(code: Array, weight: Int64Array) -> tuple[Int64Array, Int64Array]:
    """Add up the weights of equal codes; codes come out ascending."""
    different, inverse = np.unique(code, return_inverse=True)
    summed = np.zeros(len(different), np.int64)
    np.add.at(summed, inverse, weight)
    return different.astype(np.int64), summed


def _names(state: State, piece: Int32Array, name: Int64Array) -> Int64Array:
    """Spread the lowest name over the pieces that meet across ranks."""
    graph = state.graph
    row = graph.rim
    degree = np.diff(graph.indptr)[row]
    first = np.repeat(graph.indptr[row] - np.cumsum(degree) + degree, degree)
    entry = first + np.arange(len(first))
    vertex, other = np.repeat(row, degree), graph.indices[entry]
    keep = (other >= graph.n) & (state.part[other] == state.part[vertex])
    mine, ghost = piece[vertex[keep]], other[keep] - graph.n
    while True:
        before = name.copy()
        seen = graph.swap(name[piece[graph.shown]])
        np.minimum.at(name, mine, seen[ghost])
        changed = np.array([np.any(name != before)])
        if not graph.comm.allreduce(changed, "max")[0]:
            return name
