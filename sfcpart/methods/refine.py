"""Better labels on one graph under part capacities: label moves, local searches, rebalancing.

`refine` never ends with a larger cut than it started with unless the start broke a capacity, and
never breaks a capacity the start kept.

Sources: data-parallel label moves with a second look, rebalancing and rollback, Gilbert et al.,
arXiv:2304.13194 (2023); localized searches, Osipov, Sanders, ESA 2010; pairwise refinement,
Kernighan, Lin 1970; Fiduccia, Mattheyses 1982 (the last three from memory).
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.kernels.label_moves import find_boundary, look_again, propose_moves, spread_active
from sfcpart.kernels.local_search import search_from_seeds
from sfcpart.kernels.rebalance import link_parts, shed_excess
from sfcpart.kernels.threads import ranges, run_ranges
from sfcpart.methods.coarsen import WeightedGraph

__all__ = ["Labels", "boundary_of", "cut_of", "move_labels", "rebalance", "search_locally"]


@dataclass(frozen=True, eq=False)
class Labels:
    """Part of each vertex of a graph with the loads of the parts, changed in place by refinement.

    Attributes
    ----------
    graph : WeightedGraph
    part : (n,) int32
    load, capacity : (n_parts,) int64
        Weight of each part and the most it may hold.
    """

    graph: WeightedGraph
    part: Int32Array
    capacity: Int64Array
    load: Int64Array = field(init=False)
    key: Int64Array = field(init=False)
    spot: Int32Array = field(init=False)
    heap: Int32Array = field(init=False)
    link: Int64Array = field(init=False)
    near: Int32Array = field(init=False)

    def __post_init__(self) -> None:
        n, k = self.graph.n, len(self.capacity)
        load = np.zeros(k, np.int64)
        np.add.at(load, self.part, self.graph.vertex_weight)
        for name, value in (
            ("load", load),
            ("key", np.empty(n, np.int64)),
            ("spot", np.full(n, -1, np.int32)),
            ("heap", np.empty(n, np.int32)),
            ("link", np.zeros(k, np.int64)),
            ("near", np.empty(k, np.int32)),
        ):
            object.__setattr__(self, name, value)

    @property
    def overload(self) -> int:
        """Total weight above the capacities."""
        return int(np.maximum(self.load - self.capacity, 0).sum())

    @property
    def rows(self) -> tuple[Array, Array, Array, Array]:
        """The graph's four arrays, as kernels take them."""
        g = self.graph
        return g.indptr, g.indices, g.edge_weight, g.vertex_weight


def cut_of(graph: WeightedGraph, part: Int32Array) -> int:
    """Return the total weight of the edges between parts."""
    row = np.repeat(part, np.diff(graph.indptr))
    return int(graph.edge_weight[row != part[graph.indices]].sum()) // 2


def boundary_of(labels: Labels) -> Int32Array:
    """Return the vertices with a neighbour in another part, ascending."""
    n = labels.graph.n
    found = np.empty(n, np.int32)
    counts = run_ranges(
        find_boundary, n, labels.graph.indptr, labels.graph.indices, labels.part, found
    )
    pieces = [found[lo : lo + c] for (lo, _), c in zip(ranges(n), counts, strict=True)]
    return np.concatenate(pieces)


def rebalance(labels: Labels) -> None:
    """Carry excess weight to parts with room until none is over capacity or nothing helps."""
    lowest, idle = labels.overload, 0
    while lowest > 0 and idle < 4:
        boundary = boundary_of(labels)
        distance = _steps_to_room(labels, boundary)
        moved = shed_excess(
            boundary, *labels.rows, labels.part, labels.load, labels.capacity, distance,
            labels.key, labels.spot, labels.heap, labels.link, labels.near,
        )  # fmt: skip
        overload = labels.overload
        idle = 0 if overload < lowest else idle + 1
        lowest = min(lowest, overload)
        if moved == 0:
            return


def _steps_to_room(labels: Labels, boundary: Int32Array) -> Int32Array:
    """Steps over neighbouring parts from each part to one that has room."""
    n_parts = len(labels.capacity)
    touching = np.zeros((n_parts, n_parts), np.bool_)
    link_parts(boundary, labels.graph.indptr, labels.graph.indices, labels.part, touching)
    distance = np.full(n_parts, n_parts, np.int32)
    front = labels.load < labels.capacity
    distance[front] = 0
    step = 0
    while front.any():
        step += 1
        front = touching[front].any(axis=0) & (distance == n_parts)
        distance[front] = step
    return distance


def move_labels(labels: Labels, *, boldness: int = 64, patience: int = 12) -> int:
    """Improve by data-parallel label moves; return the final cut."""
    graph, part = labels.graph, labels.part
    n, n_parts = graph.n, len(labels.capacity)
    active = boundary_of(labels)
    wish = np.full(n, -1, np.int32)
    wish_gain = np.empty(n, np.int64)
    locked = np.zeros(n, np.bool_)
    seen = np.zeros(n, np.bool_)
    rows = (graph.indptr, graph.indices, graph.edge_weight)
    best = part.copy()
    best_cut = -1
    best_over = 0
    idle = 0
    while True:
        outward = sum(
            run_ranges(
                propose_moves, len(active), active, *rows, part, n_parts, locked, boldness,
                wish, wish_gain, smallest=4096,
            )
        )  # fmt: skip
        cut, over = outward // 2, labels.overload
        if best_cut < 0 or over < best_over or (over == best_over and cut < best_cut):
            if best_cut < 0 or over < best_over or cut < 0.999 * best_cut:
                idle = 0
            best_cut, best_over = cut, over
            best[:] = part
        idle += 1
        if idle > patience or len(active) == 0:
            break
        stands = np.zeros(len(active), np.bool_)
        run_ranges(look_again, len(active), active, *rows, part, wish, wish_gain, stands, smallest=4096)
        moved = active[stands]
        locked[active] = False
        locked[moved] = True
        wish_of = wish[moved]
        np.subtract.at(labels.load, part[moved], graph.vertex_weight[moved])
        np.add.at(labels.load, wish_of, graph.vertex_weight[moved])
        part[moved] = wish_of
        wish[active] = -1
        if labels.overload > 0:
            before = part.copy()
            rebalance(labels)
            shed = np.flatnonzero(before != part).astype(np.int32)
            moved = np.concatenate([moved, shed])
        out = np.empty(n, np.int32)
        active = out[: spread_active(active, moved, graph.indptr, graph.indices, part, seen, out)]
    part[:] = best
    labels.load[:] = 0
    np.add.at(labels.load, part, graph.vertex_weight)
    return best_cut


def search_locally(labels: Labels, *, rounds: int, patience: int, seed: int) -> int:
    """Improve by short searches from every boundary vertex; return by how much the cut fell."""
    total = 0
    n = labels.graph.n
    log_vertex = np.empty(n, np.int32)
    log_part = np.empty(n, np.int32)
    for turn in range(rounds):
        seeds = boundary_of(labels)
        seeds = np.random.default_rng((seed, turn)).permutation(seeds)
        done = np.zeros(n, np.bool_)
        fall = search_from_seeds(
            seeds, *labels.rows, labels.part, labels.load, labels.capacity, done, labels.key,
            labels.spot, labels.heap, labels.link, labels.near, log_vertex, log_part, patience,
        )  # fmt: skip
        total += fall
        if fall * 2000 <= total:
            break
    return total
