"""Label moves over ranks: rounds of proposals with a second look, rebalancing, and rollback.

Every round is data-parallel and reads the labels of the round before, so it does not matter who
holds which vertices. A vertex that moved rests for a round. Rounds go on while the best cost falls.
A round costs six collectives, and six more for each round of rebalancing.

Source: Gilbert, Madduri, Boman, Rajamanickam, arXiv:2304.13194 (2023), sec. 3.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import BoolArray, Int32Array, Int64Array
from sfcpart.kernels.graph.label_moves import look_again, propose_moves, spread_active
from sfcpart.kernels.threads import run_ranges
from sfcpart.methods.smoothing.excess import rebalance
from sfcpart.methods.smoothing.state import State

__all__ = ["move_labels"]

WORTH = 1000
"""A fall of the cost by less than one in so many does not renew the patience."""


def move_labels(state: State, *, boldness: int = 64, patience: int = 6) -> int:
    """Improve by label moves; return the cost, which is the start's at most if that fits.

    Parameters
    ----------
    state : State
        Changed in place: the best labels met, first by overload, then by cost.
    boldness : int
        A move may lose so many 256ths of the links of a vertex to its part.
    patience : int
        Rounds to go on without a worthwhile fall.
    """
    round_ = _Round.of(state)
    best, lowest, idle = state.part.copy(), (-1, -1), 0
    while True:
        now = (state.overload, round_.propose(boldness))
        worth = now[0] < lowest[0] or now[1] < lowest[1] - lowest[1] // WORTH
        idle = 0 if lowest[0] < 0 or (now < lowest and worth) else idle + 1
        if lowest[0] < 0 or now < lowest:
            lowest = now
            best[:] = state.part
        if idle >= patience or not round_.move():
            break
    state.restore(best)
    return lowest[1]


@dataclass(frozen=True, eq=False)
class _Round:
    """What rounds hand to each other; `active` holds the whole boundary at its beginning."""

    state: State
    active: list[Int32Array]
    wish: Int32Array
    wish_gain: Int64Array
    locked: BoolArray
    seen: BoolArray
    gid: Int64Array
    rim: Int32Array

    @classmethod
    def of(cls, state: State) -> _Round:
        """Begin with the whole boundary."""
        graph = state.graph
        return cls(
            state, [state.boundary()], np.full(graph.n_held, -1, np.int32),
            np.zeros(graph.n_held, np.int64), np.zeros(graph.n, np.bool_),
            np.zeros(graph.n, np.bool_), graph.gid, graph.rim,
        )  # fmt: skip

    def propose(self, boldness: int) -> int:
        """Let the boundary wish; return the cost of the labels as they are."""
        state, active = self.state, self.active[0]
        outward = run_ranges(
            propose_moves, len(active), active, *state.graph.rows, state.part, state.n_parts,
            state.home_part, state.home_price, self.locked, boldness, self.wish, self.wish_gain,
            smallest=4096,
        )  # fmt: skip
        total = state.graph.comm.allreduce(np.array([sum(outward), state.away()], np.int64))
        return int(total[0]) // 2 + int(total[1])

    def move(self) -> bool:
        """Make the wishes come true that stand a second look, and rebalance; tell if any did."""
        state, graph, active = self.state, self.state.graph, self.active[0]
        graph.fetch(self.wish)
        graph.fetch(self.wish_gain)
        stands = np.zeros(len(active), np.bool_)
        run_ranges(
            look_again, len(active), active, *graph.rows, state.part, self.gid, state.home_part,
            state.home_price, self.wish, self.wish_gain, stands, smallest=4096,
        )  # fmt: skip
        moved = active[stands]
        self.locked[active] = False
        self.locked[moved] = True
        to = self.wish[moved]
        self.wish[active] = -1
        state.move(moved, to)
        if state.overload > 0:
            moved = np.concatenate([moved, rebalance(state)])
        out = np.empty(graph.n, np.int32)
        near = np.concatenate([active, self.rim])
        n = spread_active(
            near, moved, graph.n, graph.indptr, graph.indices, state.part, self.seen, out
        )
        self.active[0] = out[:n]
        return bool(graph.comm.allreduce(np.array([len(moved)], np.int64))[0])
