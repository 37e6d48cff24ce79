"""Smooth a partition of a whole graph: move its borders to where they cut less, within the balance.

The work is that of `methods.smoothing` on one rank; then pieces are joined.
"""

from __future__ import annotations

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.methods.graph.balance import fill_empty_parts, join_pieces
from sfcpart.methods.graph.coarsen import WeightedGraph
from sfcpart.methods.graph.labels import Labels
from sfcpart.methods.graph.vcycle import Aim
from sfcpart.methods.smoothing.smooth import smooth_slice
from sfcpart.methods.smoothing.state import State
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice

__all__ = ["smooth"]


def smooth(
    graph: WeightedGraph,
    part: Int32Array,
    aim: Aim,
    *,
    sweeps: int = 1,
    home_part: Int32Array | None = None,
    home_price: Int64Array | None = None,
) -> Int32Array:
    """Return a partition that costs no more than `part`, (n,) int32.

    Parameters
    ----------
    graph : WeightedGraph
    part : (n,) int32
        The start; not changed.
    aim : Aim
        A start that exceeds a capacity is rebalanced first, and may then cut more.
    sweeps : int
        Rounds of flows over all pairs of neighbouring parts.
    home_part, home_price : (n,) int32, (n,) int64, optional
        Where vertices come from (-1: nowhere), and what it costs, in units of edge weight, to have
        them elsewhere: the cost is the cut and these prices.
    """
    whole = WeightedSlice.of_graph(graph)
    start = State.of(whole, part, aim.capacity, home_part=home_part, home_price=home_price)
    better = smooth_slice(
        whole,
        part,
        aim.capacity,
        sweeps=sweeps,
        home_part=home_part,
        home_price=home_price,
    )
    labels = Labels(graph, better.copy(), aim.capacity)
    join_pieces(labels)
    fill_empty_parts(labels)
    found = labels.overload, start.cost_of(labels.part)
    return labels.part if found <= (start.overload, start.cost()) else part
