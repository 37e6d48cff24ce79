"""Better labels on one graph under part capacities: local searches, flows.

None of them ends with a larger cut than it started with unless the start broke a capacity, and
none breaks a capacity the start kept.

Sources: data-parallel label moves with a second look, rebalancing and rollback, Gilbert et al.,
arXiv:2304.13194 (2023); localized searches, Osipov, Sanders, ESA 2010; flows between pairs of
parts, Sanders, Schulz, ESA 2011; pairwise refinement, Kernighan, Lin 1970; Fiduccia, Mattheyses
1982 (all but the first from memory).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Int32Array
from sfcpart.kernels.graph.flow import flow_pairs
from sfcpart.kernels.graph.local_search import search_from_seeds
from sfcpart.kernels.graph.two_way import colour_pairs, refine_pairs
from sfcpart.kernels.threads import run_ranges
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
    n, k = labels.graph.n, len(labels.capacity)
    local = np.full(n, -1, np.int32)
    stale = np.ones(k, np.bool_)
    total = 0
    for _ in range(sweeps):
        pairs = touching_pairs(labels, boundary_of(labels))
        pairs = pairs[stale[pairs].any(axis=1)]
        stale = np.zeros(k, np.bool_)
        before = total
        for turn, group in enumerate(_disjoint_groups(pairs, k)):
            if turn % 4 == 0:  # what changes meanwhile is within the bands anyway
                fringe, fringe_ptr = by_part(boundary_of(labels), labels.part, k)
            gains = np.zeros(len(group), np.int64)
            a, b = np.ascontiguousarray(group.T)
            run_ranges(
                flow_pairs, len(group), a, b, fringe_ptr, fringe, *labels.rows, labels.part,
                labels.load, labels.capacity, local, MOST, depth, stretch, gains, smallest=1,
            )  # fmt: skip
            total += int(np.maximum(gains, 0).sum())
            stale[group[gains != 0].ravel()] = True
        if total == before:
            break
    return total


def _disjoint_groups(pairs: Int32Array, n_parts: int) -> list[Int32Array]:
    """Group pairs greedily, in order, so that no part occurs twice in a group."""
    if len(pairs) == 0:
        return []
    most = 2 * int(np.bincount(pairs.ravel()).max())
    colour = np.empty(len(pairs), np.int32)
    colour_pairs(pairs, np.zeros((n_parts, most), np.bool_), colour)
    order = np.argsort(colour, kind="stable")
    return np.split(pairs[order], np.cumsum(np.bincount(colour))[:-1])


def refine_between(labels: Labels, *, sweeps: int, patience: int, slack: int) -> int:
    """Refine the border of every pair of neighbouring parts; return by how much the cut fell.

    On the way a part may exceed its capacity by `slack`, so that full parts can swap vertices.
    """
    k = len(labels.capacity)
    stale = np.ones(k, np.bool_)
    total = 0
    for _ in range(sweeps):
        pairs = touching_pairs(labels, boundary_of(labels))
        pairs = pairs[stale[pairs].any(axis=1)]
        stale = np.zeros(k, np.bool_)
        before = total
        for turn, group in enumerate(_disjoint_groups(pairs, k)):
            if turn % 4 == 0:  # passes find what changed next to what they move
                fringe, fringe_ptr = by_part(boundary_of(labels), labels.part, k)
            gains = np.zeros(len(group), np.int64)
            a, b = np.ascontiguousarray(group.T)
            run_ranges(
                refine_pairs, len(group), a, b, fringe_ptr, fringe, *labels.rows, labels.part,
                labels.load, labels.capacity, slack, labels.key, labels.spot, patience, gains,
                smallest=1,
            )  # fmt: skip
            total += int(gains.sum())
            stale[group[gains > 0].ravel()] = True
        if total == before:
            break
    return total
