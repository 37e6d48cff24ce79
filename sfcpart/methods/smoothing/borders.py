"""Put the borders between neighbouring parts where they cut least: flows, pair by pair.

Pairs that share no part are solved at once, each on one rank: the band of vertices around its
border is sent there from the ranks that hold them, the new sides come back. A band is a few layers
deep and no heavier than the parts have room for, so no rank sees more than its share of borders.
What is sent, and what comes out, does not depend on the number of ranks.

A group of pairs costs about ten collectives, and there are about twice as many groups as a part
has neighbours. Arrays of n_parts and of the pairs that touch are held by every rank.

Source: flows between pairs of parts, Sanders, Schulz, ESA 2011 (from memory).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.kernels.graph.two_way import colour_pairs
from sfcpart.methods.smoothing.bands import Bands
from sfcpart.methods.smoothing.state import State

__all__ = ["flow_between", "touching_pairs"]

FRESH = 4
"""Groups of pairs after which the boundary is listed anew."""


def flow_between(state: State, *, sweeps: int) -> int:
    """Improve the border of every pair of neighbouring parts; return by how much the cost fell."""
    bands = Bands.of(state)
    stale = np.ones(state.n_parts, np.bool_)
    total = 0
    for _ in range(sweeps):
        pairs, _ = touching_pairs(state)
        pairs = pairs[stale[pairs].any(axis=1)]
        stale[:] = False
        before = total
        for turn, group in enumerate(disjoint_groups(pairs, state.n_parts)):
            if turn % FRESH == 0:  # what changes meanwhile is within the bands anyway
                fringe = bands.fringe()
            gain = bands.place(group, fringe)
            total += int(np.maximum(gain, 0).sum())
            stale[group[gain != 0].ravel()] = True
        if total == before:
            break
    return total


def touching_pairs(state: State) -> tuple[Int32Array, Int64Array]:
    """Return the pairs (a, b), a < b, of neighbouring parts, longest borders first, and lengths."""
    graph, part, k = state.graph, state.part, state.n_parts
    boundary = state.boundary()
    degree = graph.indptr[boundary + 1] - graph.indptr[boundary]
    first = np.repeat(graph.indptr[boundary] - np.cumsum(degree) + degree, degree)
    entry = first + np.arange(len(first))
    p, q = np.repeat(part[boundary], degree), part[graph.indices[entry]]
    keep = p < q  # every edge is met once: by the rank that holds its end in the lower part
    rows = _summed(p[keep].astype(np.int64) * k + q[keep], graph.edge_weight[entry[keep]])
    code, weight = _summed(*np.concatenate(graph.comm.allgather(np.stack(rows, axis=1))).T)
    order = np.lexsort((code, -weight))
    pairs = np.stack([code[order] // k, code[order] % k], axis=1).astype(np.int32)
    return pairs, weight[order]


def _summed(code: Int64Array, weight: Int64Array) -> tuple[Int64Array, Int64Array]:
    """Add up the weights of equal codes; codes come out ascending."""
    different, inverse = np.unique(code, return_inverse=True)
    summed = np.zeros(len(different), np.int64)
    np.add.at(summed, inverse, weight)
    return different, summed


def disjoint_groups(pairs: Int32Array, n_parts: int) -> list[Int32Array]:
    """Group pairs greedily, in order, so that no part occurs twice in a group."""
    if len(pairs) == 0:
        return []
    most = 2 * int(np.bincount(pairs.ravel()).max())
    colour = np.empty(len(pairs), np.int32)
    colour_pairs(pairs, np.zeros((n_parts, most), np.bool_), colour)
    order = np.argsort(colour, kind="stable")
    return np.split(pairs[order], np.cumsum(np.bincount(colour))[:-1])
