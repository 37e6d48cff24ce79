"""Keep capacities, leave no part empty, and keep parts in one piece.

Source: rebalancing by least loss, Gilbert et al., arXiv:2304.13194 (2023), sec. 3; excess is
carried over neighbouring parts towards the nearest with room.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Int32Array
from sfcpart.kernels.graph.fragments import give_away_pieces, label_pieces
from sfcpart.kernels.graph.rebalance import link_parts, shed_excess
from sfcpart.methods.graph.labels import Labels, boundary_of

__all__ = ["fill_empty_parts", "join_pieces", "rebalance"]


def rebalance(labels: Labels, *, reach: int = 0) -> None:
    """Carry excess weight to parts with room until none is over capacity or nothing helps.

    With `reach` > 0 only vertices move whose leaving keeps their part in one piece, as far as
    `reach` vertices around them tell.
    """
    heap, queue = np.empty(labels.graph.n, np.int32), np.empty(reach + 1, np.int32)
    mark = np.zeros(labels.graph.n if reach else 0, np.int8)
    lowest, idle = labels.overload, 0
    while lowest > 0 and idle < 4:
        boundary = boundary_of(labels)
        distance = _steps_to_room(labels, boundary)
        moved = shed_excess(
            boundary, *labels.rows, labels.part, labels.load, labels.capacity, distance,
            labels.key, labels.spot, heap, labels.link, labels.near, reach, mark, queue,
        )  # fmt: skip
        overload = labels.overload
        idle = 0 if overload < lowest else idle + 1
        lowest = min(lowest, overload)
        if moved == 0:
            return


def _steps_to_room(labels: Labels, boundary: Int32Array) -> Int32Array:
    """Steps over neighbouring parts from each part to one that has room."""
    n_parts = len(labels.capacity)
    touching = np.zeros((n_parts, n_parts), np.bool_)
    link_parts(boundary, labels.graph.indptr, labels.graph.indices, labels.part, touching)
    distance = np.full(n_parts, n_parts, np.int32)
    front = labels.load < labels.capacity
    distance[front] = 0
    step = 0
    while front.any():
        step += 1
        front = touching[front].any(axis=0) & (distance == n_parts)
        distance[front] = step
    return distance


def join_pieces(labels: Labels, *, rounds: int = 4) -> None:
    """Give pieces cut off from their part's heaviest to the parts they touch most, then rebalance.

    The cut only falls by it, but for the rebalancing. Pieces that touch no other part (of a
    disconnected graph) stay.
    """
    n = labels.graph.n
    before, overload = labels.part.copy(), labels.overload
    piece, queue = np.empty(n, np.int32), np.empty(n, np.int32)
    indptr, indices, *_ = labels.rows
    for turn in range(rounds):
        count = label_pieces(indptr, indices, labels.part, piece, queue)
        if count <= len(labels.load):
            label = np.unique(labels.part)
            if count == len(label):
                break
        main = _main_pieces(labels, piece, count)
        moved = give_away_pieces(
            *labels.rows, labels.part, labels.load, labels.capacity, piece, main, queue
        )
        if labels.overload > 0:
            rebalance(labels, reach=100 << turn)
        elif moved == 0:
            break
    if labels.overload > overload:  # a star, for instance: pieces cannot be had in balance
        labels.restore(before)


def _main_pieces(labels: Labels, piece: Int32Array, count: int) -> np.ndarray:
    """Mark the heaviest piece of each part (by weight, then size, then the first)."""
    weight = np.zeros(count, np.int64)
    np.add.at(weight, piece, labels.graph.vertex_weight)
    size = np.bincount(piece, minlength=count)
    part = np.empty(count, np.int32)
    part[piece] = labels.part
    order = np.lexsort((np.arange(count), -size, -weight, part))
    first = np.append(True, part[order][1:] != part[order][:-1])
    main = np.zeros(count, np.bool_)
    main[order[first]] = True
    return main


def fill_empty_parts(labels: Labels) -> None:
    """Give every empty part the vertex, of a part with several, that costs the least."""
    graph, part = labels.graph, labels.part
    n_parts = len(labels.load)
    size = np.bincount(part, minlength=n_parts)
    for p in np.flatnonzero(size == 0)[: max(0, graph.n - n_parts + int((size == 0).sum()))]:
        inside = np.zeros(graph.n, np.int64)
        row = np.repeat(np.arange(graph.n), np.diff(graph.indptr))
        same = part[row] == part[graph.indices]
        np.add.at(inside, row[same], graph.edge_weight[same])
        movable = np.flatnonzero(size[part] > 1)
        if len(movable) == 0:
            return
        excess = (labels.load - labels.capacity)[part[movable]]
        v = movable[np.lexsort((movable, inside[movable], -excess))[0]]
        for q, sign in ((part[v], -1), (p, 1)):
            size[q] += sign
            labels.load[q] += sign * graph.vertex_weight[v]
        part[v] = p
