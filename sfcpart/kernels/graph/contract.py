"""Merge vertices of a weighted graph: rows of the coarse graph, in parallel over its vertices."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.kernels._jit import jit

__all__ = ["compact_rows", "group_members", "merge_rows"]


@jit
def group_members(label: Array, member_ptr: Array, members: Array) -> None:
    """List the rows of each label: row i goes to `members`, stable, by counting.

    `member_ptr` (n_labels + 1,) is zero on entry and the offsets on return.
    """
    for i in range(len(label)):
        member_ptr[label[i] + 1] += 1
    for c in range(len(member_ptr) - 1):
        member_ptr[c + 1] += member_ptr[c]
    for i in range(len(label)):
        members[member_ptr[label[i]]] = i
        member_ptr[label[i]] += 1
    for c in range(len(member_ptr) - 1, 0, -1):
        member_ptr[c] = member_ptr[c - 1]
    member_ptr[0] = 0


@jit
def merge_rows(
    start: int,
    stop: int,
    member_ptr: Array,
    members: Array,
    coarse_of: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
    room_ptr: Array,
    room_index: Array,
    room_weight: Array,
    n_entries: Array,
) -> None:
    """Merge the rows of the members of coarse vertices `start:stop`, without self-loops.

    Row c is written from `room_ptr[c]` on, its length to `n_entries[c]`; neighbours stand in
    the order in which they are first met.
    """
    slot = np.full(len(n_entries), -1, np.int64)
    for c in range(start, stop):
        first = room_ptr[c]
        last = first
        for i in range(member_ptr[c], member_ptr[c + 1]):
            v = members[i]
            for j in range(indptr[v], indptr[v + 1]):
                d = coarse_of[indices[j]]
                if d == c:
                    continue
                if slot[d] >= first:
                    room_weight[slot[d]] += edge_weight[j]
                else:
                    slot[d] = last
                    room_index[last] = d
                    room_weight[last] = edge_weight[j]
                    last += 1
        n_entries[c] = last - first


@jit
def compact_rows(
    start: int,
    stop: int,
    room_ptr: Array,
    room_index: Array,
    room_weight: Array,
    indptr: Array,
    indices: Array,
    edge_weight: Array,
) -> None:
    """Copy rows `start:stop` from their rooms to their final places."""
    for c in range(start, stop):
        shift = room_ptr[c] - indptr[c]
        for j in range(indptr[c], indptr[c + 1]):
            indices[j] = room_index[j + shift]
            edge_weight[j] = room_weight[j + shift]
