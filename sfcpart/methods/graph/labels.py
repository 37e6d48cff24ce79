"""Part of each vertex with the loads of the parts: the state that refinement changes in place."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.kernels.graph.label_moves import find_boundary
from sfcpart.kernels.threads import ranges, run_ranges
from sfcpart.methods.graph.coarsen import WeightedGraph

__all__ = ["Labels", "boundary_of", "by_part", "cut_of", "loads_of", "touching_pairs"]


@dataclass(frozen=True, eq=False)
class Labels:
    """Labels of a graph's vertices under capacities, with the scratch that kernels share.

    Attributes
    ----------
    graph : WeightedGraph
    part : (n,) int32
        Changed in place.
    capacity : (n_parts,) int64
        The most each part may weigh.
    load : (n_parts,) int64
        What each weighs now.
    """

    graph: WeightedGraph
    part: Int32Array
    capacity: Int64Array
    load: Int64Array = field(init=False)
    key: Int64Array = field(init=False)
    spot: Int32Array = field(init=False)
    link: Int64Array = field(init=False)
    near: Int32Array = field(init=False)

    def __post_init__(self) -> None:
        n, k = self.graph.n, len(self.capacity)
        for name, value in (
            ("load", loads_of(self.graph, self.part, k)),
            ("key", np.empty(n, np.int64)),
            ("spot", np.full(n, -1, np.int32)),
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

    def restore(self, part: Int32Array) -> None:
        """Go back to other labels."""
        self.part[:] = part
        self.load[:] = loads_of(self.graph, part, len(self.load))


def loads_of(graph: WeightedGraph, part: Int32Array, n_parts: int) -> Int64Array:
    """Return the weight of each part."""
    load = np.zeros(n_parts, np.int64)
    np.add.at(load, part, graph.vertex_weight)
    return load


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


def by_part(vertices: Int32Array, part: Int32Array, n_parts: int) -> tuple[Int32Array, Int64Array]:
    """Sort vertices by part (stable); return them and the offsets of the parts."""
    label = part[vertices]
    count = np.bincount(label, minlength=n_parts)
    order = np.argsort(label, kind="stable")
    return vertices[order], np.concatenate([[0], np.cumsum(count)]).astype(np.int64)


def touching_pairs(labels: Labels, boundary: Int32Array) -> Int32Array:
    """Return the pairs (a, b), a < b, of neighbouring parts, longest borders first."""
    graph, part, k = labels.graph, labels.part, len(labels.capacity)
    degree = graph.indptr[boundary + 1] - graph.indptr[boundary]
    first = np.repeat(graph.indptr[boundary] - np.cumsum(degree) + degree, degree)
    entry = first + np.arange(len(first))
    p, q = np.repeat(part[boundary], degree), part[graph.indices[entry]]
    keep = p < q
    code, inverse = np.unique(p[keep].astype(np.int64) * k + q[keep], return_inverse=True)
    weight = np.zeros(len(code), np.int64)
    np.add.at(weight, inverse, graph.edge_weight[entry[keep]])
    order = np.lexsort((code, -weight))
    return np.stack([code[order] // k, code[order] % k], axis=1).astype(np.int32)
