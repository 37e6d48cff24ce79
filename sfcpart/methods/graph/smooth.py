"""Smooth a partition of a whole graph: move its borders to where they cut less, within the balance.

The work is that of `methods.smoothing`, on one rank.
"""

from __future__ import annotations

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.methods.graph.coarsen import WeightedGraph
from sfcpart.methods.graph.vcycle import Aim
from sfcpart.methods.smoothing.smooth import smooth_slice
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice

__all__ = ["smooth"]


def smooth(
    graph: WeightedGraph,
    part: Int32Array,
    aim: Aim,
    *,
    sweeps: int | None = None,
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
        Rounds of flows over all pairs of neighbouring parts; 1 by default, 2 where borders are
        ragged or parts small.
    home_part, home_price : (n,) int32, (n,) int64, optional
        Where vertices come from (-1: nowhere), and what it costs, in units of edge weight, to have
        them elsewhere: the cost is the cut and these prices.
    """
    return smooth_slice(
        WeightedSlice.of_graph(graph),
        part,
        aim.capacity,
        sweeps=sweeps,
        home_part=home_part,
        home_price=home_price,
    )
