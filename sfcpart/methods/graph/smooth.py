"""Smooth a partition: move its borders to where they cut fewer faces, within the balance.

`smooth` improves any start on the flat graph: a round of short local searches, then flows between
neighbouring parts, then pieces are joined. `improve` of `methods.graph.vcycle` does the same
through a hierarchy that respects the start: a smaller cut for four times the time.

Measured (1.08e6 random Delaunay tets, 64 parts, 3 %, one thread): cut 0.623 of the Hilbert start
in 1.0 s, with two sweeps 0.596 in 1.45 s; `improve` 0.572 in 5.3 s, `divide` 0.572 in 4.2 s. Label
moves alone 0.715 in 0.9 s; before the flows they bring 0.005 for 0.4 s and are left out.
"""

from __future__ import annotations

from sfcpart.dtypes import Int32Array
from sfcpart.methods.graph.balance import fill_empty_parts, join_pieces, rebalance
from sfcpart.methods.graph.coarsen import WeightedGraph
from sfcpart.methods.graph.labels import Labels, cut_of
from sfcpart.methods.graph.refine import flow_between, search_locally
from sfcpart.methods.graph.vcycle import Aim

__all__ = ["smooth"]


def smooth(graph: WeightedGraph, part: Int32Array, aim: Aim, *, sweeps: int = 1) -> Int32Array:
    """Return a partition that cuts no more than `part`, (n,) int32.

    Parameters
    ----------
    graph : WeightedGraph
    part : (n,) int32
        The start; not changed.
    aim : Aim
        A start that exceeds a capacity is rebalanced first, and may then cut more.
    sweeps : int
        Rounds of flows over all pairs of neighbouring parts.
    """
    labels = Labels(graph, part.copy(), aim.capacity)
    start = labels.overload, cut_of(graph, part)
    rebalance(labels)
    search_locally(labels, rounds=1, patience=6, seed=aim.seed)
    flow_between(labels, sweeps=sweeps, depth=3, stretch=4.0)
    join_pieces(labels)
    fill_empty_parts(labels)
    return labels.part if (labels.overload, cut_of(graph, labels.part)) <= start else part
