"""Smooth a partition over ranks: move its borders to where they cut less, within the balance.

Label moves straighten ragged borders, flows then put each border between two parts where it cuts
least. The answer does not depend on the number of ranks or threads.
"""

from __future__ import annotations

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.methods.smoothing.borders import flow_between
from sfcpart.methods.smoothing.excess import fill_empty_parts, rebalance
from sfcpart.methods.smoothing.moves import move_labels
from sfcpart.methods.smoothing.state import State
from sfcpart.methods.smoothing.weighted_slice import WeightedSlice

__all__ = ["smooth_slice"]


def smooth_slice(
    graph: WeightedSlice,
    part: Int32Array,
    capacity: Int64Array,
    *,
    sweeps: int = 1,
    home_part: Int32Array | None = None,
    home_price: Int64Array | None = None,
) -> Int32Array:
    """Return parts of this rank's vertices that cost no more than the given ones (collective).

    Parameters
    ----------
    graph : WeightedSlice
    part : (n,) int32
        The start; not changed.
    capacity : (n_parts,) int64
        The most each part may weigh. A start that exceeds it is rebalanced, and may then cost more.
    sweeps : int
        Rounds of flows over all pairs of neighbouring parts.
    home_part, home_price : (n,) int32, (n,) int64, optional
        Where vertices come from, and what it costs to have them elsewhere, in units of edge
        weight: the cost is the cut and these prices. A part of -1 is no home.
    """
    state = State.of(graph, part, capacity, home_part=home_part, home_price=home_price)
    start = state.overload, state.cost()
    rebalance(state)
    move_labels(state, patience=1)
    flow_between(state, sweeps=sweeps)
    fill_empty_parts(state)
    return state.own.copy() if (state.overload, state.cost()) <= start else part
