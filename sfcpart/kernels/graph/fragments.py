"""Pieces of parts: label them, and give small ones to the part they touch most."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["give_away_pieces", "label_pieces"]


@jit
def label_pieces(indptr: Array, indices: Array, part: Array, piece: Array, queue: Array) -> int:
    """Number the connected pieces of equal label in `piece` by first vertex; return how many."""
    n = len(part)
    for v in range(n):
        piece[v] = -1
    count = 0
    for first in range(n):
        if piece[first] >= 0:
            continue
        piece[first] = count
        queue[0] = first
        last = 1
        i = 0
        while i < last:
            v = queue[i]
            i += 1
            for j in range(indptr[v], indptr[v + 1]):
                u = indices[j]
                if piece[u] < 0 and part[u] == part[v]:
                    piece[u] = count
                    queue[last] = u
                    last += 1
        count += 1
    return count


@jit
def give_away_pieces(
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    vertex_weight: Array,
    part: Array,
    load: Array,
    capacity: Array,
    piece: Array,
    is_main: Array,
    queue: Array,
) -> int:
    """Move each piece that is not its part's main one to the part whose main piece it links best.

    Parts with room for it come first. Returns how many pieces moved; those that touch no main
    piece yet stay for the next call.
    """
    link = np.zeros(len(load), np.int64)
    n_moved = 0
    for first in range(len(part)):
        label = piece[first]
        if label < 0 or is_main[label]:
            continue
        queue[0] = first
        piece[first] = -1
        last = 1
        i = 0
        weight = 0
        best = -1
        best_fits = False
        while i < last:
            v = queue[i]
            i += 1
            weight += vertex_weight[v]
            for j in range(indptr[v], indptr[v + 1]):
                u = indices[j]
                if piece[u] == label:
                    piece[u] = -1
                    queue[last] = u
                    last += 1
                elif piece[u] >= 0 and is_main[piece[u]]:
                    link[part[u]] += edge_weight[j]
        own = part[first]
        main = -2
        for turn in range(2):  # the best part, then clean up
            for i in range(last):
                v = queue[i]
                for j in range(indptr[v], indptr[v + 1]):
                    u = indices[j]
                    p = part[u]
                    if turn == 1:
                        link[p] = 0
                    elif p != own and link[p] > 0:
                        fits = load[p] + weight <= capacity[p]
                        if (
                            best < 0
                            or (fits and not best_fits)
                            or (
                                fits == best_fits
                                and (link[p] > link[best] or (link[p] == link[best] and p < best))
                            )
                        ):
                            best = p
                            best_fits = fits
        if best >= 0:
            for i in range(last):
                for j in range(indptr[queue[i]], indptr[queue[i] + 1]):
                    u = indices[j]
                    if part[u] == best and piece[u] >= 0 and is_main[piece[u]]:
                        main = piece[u]
            n_moved += 1
            load[own] -= weight
            load[best] += weight
        for i in range(last):
            piece[queue[i]] = main
            if best >= 0:
                part[queue[i]] = best
    return n_moved
