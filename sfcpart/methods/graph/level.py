"""Refine one level of a hierarchy: rebalance, short local searches, flows, then pairs of parts.

How much is done depends on the size of the graph that is divided, and on how large its parts are.
"""

from __future__ import annotations

from dataclasses import dataclass

from sfcpart.dtypes import Int32Array
from sfcpart.methods.graph.aim import Aim
from sfcpart.methods.graph.balance import fill_empty_parts, join_pieces, rebalance
from sfcpart.methods.graph.coarsen import WeightedGraph
from sfcpart.methods.graph.labels import Labels, boundary_of
from sfcpart.methods.graph.refine import flow_between, refine_between, search_locally

__all__ = ["Blocks", "Effort", "refine_level"]

Blocks = list[tuple[int, int]]
"""Each block stands for the parts from its first number up to its last, exclusive."""

ROOMY = 1500
"""Large graphs with more vertices a part are refined by flows alone: local searches cost a fifth
of the time there and bring nothing that can be measured."""

TINY = 500
"""Parts of fewer vertices, on large graphs, get narrower bands."""


@dataclass(frozen=True)
class Effort:
    """How much is done on each level.

    Attributes
    ----------
    rounds, patience : int
        Rounds of local searches, and how many moves each may try in vain.
    sweeps : int
        Rounds of flows over all pairs; at least 2 where little is cut.
    depth : int
        Steps from a border to the edge of its band.
    stretch : float
        Weight of a band as a multiple of the room the other part has.
    turns, insistence : int
        Rounds of two-way refinement of all pairs, and how many moves each may try in vain.
    """

    rounds: int
    patience: int
    sweeps: int
    depth: int
    stretch: float
    turns: int
    insistence: int

    @classmethod
    def on(cls, n: int) -> Effort:
        """Choose by the number of vertices of the finest graph."""
        return FULL if n <= LARGE else QUICK


FULL = Effort(rounds=5, patience=15, sweeps=5, depth=3, stretch=4.0, turns=3, insistence=200)
QUICK = Effort(rounds=1, patience=6, sweeps=1, depth=4, stretch=8.0, turns=1, insistence=20)

LARGE = 200_000
"""Vertices up to which graphs get full effort."""


def refine_level(
    graph: WeightedGraph,
    part: Int32Array,
    aim: Aim,
    blocks: Blocks | None,
    *,
    finest: bool,
    effort: Effort,
) -> None:
    """Refine one level in place; without blocks the labels are final parts."""
    heaviest = int(graph.vertex_weight.max())
    apart = blocks is None or len(blocks) == aim.n_parts
    capacity = aim.capacity if finest else aim.relaxed(heaviest)
    if blocks is not None and not apart and not finest:
        capacity = aim.of_blocks(blocks, heaviest)
    labels = Labels(graph, part, capacity)
    rebalance(labels)
    _move_borders(labels, effort, graph.n / (len(blocks) if blocks else aim.n_parts), aim.seed)
    tight = float((aim.capacity - aim.share).max(initial=0.0)) < 4 * heaviest
    if effort != QUICK or (tight and finest):
        slack = heaviest if tight else 0
        refine_between(labels, sweeps=effort.turns, patience=effort.insistence, slack=slack)
    if finest and apart:
        join_pieces(labels)
        fill_empty_parts(labels)


def _move_borders(labels: Labels, effort: Effort, size: float, seed: int) -> None:
    """Search locally and let flows place the borders of parts of `size` vertices."""
    if effort != QUICK or size < ROOMY:
        search_locally(labels, rounds=effort.rounds, patience=effort.patience, seed=seed)
    few = 8 * len(boundary_of(labels)) < labels.graph.n  # then another sweep costs little
    flow_between(
        labels,
        sweeps=max(effort.sweeps, 2) if few else effort.sweeps,
        depth=min(effort.depth, 2) if effort == QUICK and size <= TINY else effort.depth,
        stretch=effort.stretch,
    )
