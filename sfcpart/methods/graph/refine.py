"""Better labels on one graph under part capacities: local searches, flows.

None of them ends with a larger cut than it started with unless the start broke a capacity, and
none breaks a capacity the start kept.

Sources: data-parallel label moves with a second look, rebalancing and rollback, Gilbert et al.,
arXiv:2304.13194 (2023); localized searches, Osipov, Sanders, ESA 2010; flows between pairs of
parts, Sanders, Schulz, ESA 2011; pairwise refinement, Kernighan, Lin 1970; Fiduccia, Mattheyses
1982 (all but the first from memory).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.kernels.graph.flow import flow_pairs
from sfcpart.kernels.graph.local_search import search_from_seeds
from sfcpart.kernels.graph.two_way import colour_pairs, refine_pairs
from sfcpart.kernels.threads import n_threads, run_ranges
from sfcpart.methods.graph.labels import Labels, boundary_of, by_part, touching_pairs

__all__ = ["flow_between", "refine_between", "search_locally"]

MOST = 20_000
"""Vertices a side of a band between two parts."""


def search_locally(labels: Labels, *, rounds: int, patience: int, seed: int) -> int:
    """Improve by short searches from every boundary vertex; return by how much the cut fell."""
    total = 0
    for turn in range(rounds):
        seeds = np.random.default_rng((seed, turn)).permutation(boundary_of(labels))
        room = np.maximum(labels.capacity - labels.load, 0)
        before = room.copy()
        fall = search_from_seeds(
            seeds, *labels.rows, labels.part, room, np.zeros(labels.graph.n, np.bool_),
            labels.key, labels.spot, labels.link, labels.near, patience,
        )  # fmt: skip
        labels.load[:] += before - room
        total += fall
        if fall * 2000 <= total:
            break
    return total


def flow_between(labels: Labels, *, sweeps: int, depth: int, stretch: float) -> int:
    """Put the borders of all pairs of neighbouring parts where they cut least; return the fall."""
    local = np.full(labels.graph.n, -1, np.int32)
    most = min(MOST, labels.graph.n)

    def flow(pairs: Int32Array, fringe: Int32Array, fringe_ptr: Int64Array) -> Int64Array:
        gains = np.zeros(len(pairs), np.int64)
        a, b = np.ascontiguousarray(pairs.T)
        run_ranges(
            flow_pairs, len(pairs), a, b, fringe_ptr, fringe, *labels.rows, labels.part,
            labels.load, labels.capacity, local, most, depth, stretch, gains, smallest=1,
        )  # fmt: skip
        return gains

    return _sweep_pairs(labels, sweeps, flow)


def _sweep_pairs(
    labels: Labels, sweeps: int, work: Callable[[Int32Array, Int32Array, Int64Array], Int64Array]
) -> int:
    """Do work on pairs of neighbouring parts until none of them gains; return the fall of the cut.

    In later sweeps only pairs with a part that changed are worked on. The boundary is listed once
    a sweep: what changes meanwhile lies next to what is listed (listing it four times brings
    nothing that can be measured).
    """
    k = len(labels.capacity)
    stale = np.ones(k, np.bool_)
    total = 0
    for _ in range(sweeps):
        boundary = boundary_of(labels)
        pairs = touching_pairs(labels, boundary)
        pairs = pairs[stale[pairs].any(axis=1)]
        fringe = by_part(boundary, labels.part, k)
        stale = np.zeros(k, np.bool_)
        before = total
        for group in _disjoint_groups(pairs, k):
            gains = work(group, *fringe)
            total += int(np.maximum(gains, 0).sum())
            stale[group[gains != 0].ravel()] = True
        if total == before:
            break
    return total


def _disjoint_groups(pairs: Int32Array, n_parts: int) -> list[Int32Array]:
    """Group pairs greedily, in order, so that no part occurs twice in a group.

    Within a group they are dealt to the threads in turn, so that each gets long and short borders.
    """
    if len(pairs) == 0:
        return []
    most = 2 * int(np.bincount(pairs.ravel()).max())
    colour = np.empty(len(pairs), np.int32)
    colour_pairs(pairs, np.zeros((n_parts, most), np.bool_), colour)
    order = np.argsort(colour, kind="stable")
    groups = np.split(pairs[order], np.cumsum(np.bincount(colour))[:-1])
    hands = n_threads()
    return [np.concatenate([group[i::hands] for i in range(hands)]) for group in groups]


def refine_between(labels: Labels, *, sweeps: int, patience: int, slack: int) -> int:
    """Refine the border of every pair of neighbouring parts; return by how much the cut fell.

    On the way a part may exceed its capacity by `slack`, so that full parts can swap vertices.
    """

    def refine(pairs: Int32Array, fringe: Int32Array, fringe_ptr: Int64Array) -> Int64Array:
        gains = np.zeros(len(pairs), np.int64)
        a, b = np.ascontiguousarray(pairs.T)
        run_ranges(
            refine_pairs, len(pairs), a, b, fringe_ptr, fringe, *labels.rows, labels.part,
            labels.load, labels.capacity, slack, labels.key, labels.spot, patience, gains,
            smallest=1,
        )  # fmt: skip
        return gains

    return _sweep_pairs(labels, sweeps, refine)
