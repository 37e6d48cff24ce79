"""Part of each vertex of a slice with the loads of all parts: what smoothing changes in place."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.kernels.graph.label_moves import find_boundary
from sfcpart.kernels.threads import ranges, run_ranges
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice

__all__ = ["State"]

NO_PART = np.empty(0, np.int32)
NO_PRICE = np.empty(0, np.int64)


@dataclass(frozen=True, eq=False)
class State:
    """Labels of a slice's vertices under capacities; loads are those of all ranks.

    Attributes
    ----------
    graph : WeightedSlice
    part : (n_held,) int32
        Of this rank's vertices and of its ghosts.
    capacity : (n_parts,) int64
        The most each part may weigh.
    home_part : (n,) int32, or empty
        Where vertices come from; with `home_price` (n,) int64 >= 0, what it costs, in units of
        edge weight, if they are elsewhere.
    priced : bool
        Whether there are homes, on all ranks alike; one without vertices has empty arrays.
    load : (n_parts,) int64
        What each part weighs now.
    """

    graph: WeightedSlice
    part: Int32Array
    capacity: Int64Array
    home_part: Int32Array = field(default_factory=lambda: NO_PART)
    home_price: Int64Array = field(default_factory=lambda: NO_PRICE)
    priced: bool = False
    load: Int64Array = field(init=False)

    def __post_init__(self) -> None:
        own = self.part[: self.graph.n]
        load = self.graph.sum_by(own, self.graph.vertex_weight, self.n_parts)
        object.__setattr__(self, "load", load)

    @classmethod
    def of(
        cls,
        graph: WeightedSlice,
        part: Int32Array,
        capacity: Int64Array,
        *,
        home_part: Int32Array | None = None,
        home_price: Int64Array | None = None,
    ) -> State:
        """Start from the parts of this rank's vertices, (n,); they are copied."""
        home = NO_PART if home_part is None else home_part.astype(np.int32, copy=False)
        price = NO_PRICE if home_price is None else home_price.astype(np.int64, copy=False)
        held = graph.held(part.astype(np.int32, copy=False))
        return cls(graph, held, capacity, home, price, home_part is not None)

    @property
    def n_parts(self) -> int:
        """Number of parts."""
        return len(self.capacity)

    @property
    def own(self) -> Int32Array:
        """The parts of this rank's vertices, a view."""
        return self.part[: self.graph.n]

    @property
    def overload(self) -> int:
        """Total weight above the capacities."""
        return int(np.maximum(self.load - self.capacity, 0).sum())

    def boundary(self) -> Int32Array:
        """Return this rank's vertices with a neighbour in another part, ascending."""
        n = self.graph.n
        found = np.empty(n, np.int32)
        indptr, indices, _ = self.graph.rows
        counts = run_ranges(find_boundary, n, indptr, indices, self.part, found)
        pieces = [found[lo : lo + c] for (lo, _), c in zip(ranges(n), counts, strict=True)]
        return np.concatenate(pieces)

    def cost(self) -> int:
        """Return the weight of the edges between parts, and the price of what left its home."""
        return self.cost_of(self.part)

    def cost_of(self, held: Int32Array) -> int:
        """Return the same for other labels, (n_held,)."""
        graph, own = self.graph, held[: self.graph.n]
        row = np.repeat(own, np.diff(graph.indptr))
        cut = int(graph.edge_weight[row != held[graph.indices]].sum())
        away = int(self.home_price[self.home_part != own].sum()) if len(self.home_part) else 0
        total = graph.comm.allreduce(np.array([cut, away], np.int64))
        return int(total[0]) // 2 + int(total[1])

    def away(self) -> int:
        """Return the price of this rank's vertices that are not at home."""
        if not len(self.home_part):
            return 0
        return int(self.home_price[self.home_part != self.own].sum())

    def move(self, vertices: Array, to: Array) -> None:
        """Move some of this rank's vertices; tell the other ranks (collective)."""
        graph = self.graph
        change = np.zeros(self.n_parts, np.int64)
        np.subtract.at(change, self.part[vertices], graph.vertex_weight[vertices])
        np.add.at(change, to, graph.vertex_weight[vertices])
        self.load[:] += graph.comm.allreduce(change)
        self.part[vertices] = to
        graph.fetch(self.part)

    def restore(self, held: Int32Array) -> None:
        """Go back to other labels of all that is held."""
        self.part[:] = held
        self.load[:] = self.graph.sum_by(self.own, self.graph.vertex_weight, self.n_parts)
