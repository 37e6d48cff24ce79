"""Exchange lists: spread parts over a relation, then sort the pairs by counting.

How: every cell gathers the distinct foreign parts that reach it over one layer; visiting cells
part by part in local order, stable counting sorts by destination and by owner give receive and
send lists that agree, without a comparison sort.

Cost: O(entries of the relation) a layer, two passes (count, fill); sorting is O(n_cells + pairs).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array, IntArray
from sfcpart.kernels._jit import jit

__all__ = ["arrange", "reach", "rows_of_columns"]


@jit
def reach(
    start: int,
    stop: int,
    indptr: Int64Array,
    indices: IntArray,
    row_part: Int32Array,
    column_part: Int32Array,
    from_indptr: Int64Array,
    from_part: Int32Array,
    to_indptr: Int64Array,
    to_part: Int32Array,
    capacity: int,
) -> int:
    """Collect per row the distinct parts found at its columns, its own excepted.

    Column j offers `column_part[j]` (unless negative) and its list `from_part` (CSR; an empty
    `from_part` means no lists). With an empty `to_part` the number of parts of row i goes to
    `to_indptr[i + 1]`, otherwise the parts, ascending, go to `to_part` at `to_indptr[i]`.
    Returns the longest list met; when that exceeds `capacity` the caller repeats with more.
    """
    found = np.empty(capacity, np.int32)
    longest = 0
    fill = len(to_part) > 0
    for i in range(start, stop):
        if fill and to_indptr[i] == to_indptr[i + 1]:
            continue
        own = row_part[i]
        last = own
        count = 0
        for e in range(indptr[i], indptr[i + 1]):
            j = indices[e]
            first = from_indptr[j] if len(from_part) > 0 else 0
            size = from_indptr[j + 1] - first if len(from_part) > 0 else 0
            for k in range(-1, size):
                part = column_part[j] if k < 0 else from_part[first + k]
                if part < 0 or part in (own, last):
                    continue
                last = part
                at = count
                while at > 0 and found[at - 1] > part:
                    at -= 1
                if at > 0 and found[at - 1] == part:
                    continue
                if count == capacity:
                    return capacity + 1
                for move in range(count, at, -1):
                    found[move] = found[move - 1]
                found[at] = part
                count += 1
        longest = max(longest, count)
        if fill:
            for k in range(count):
                to_part[to_indptr[i] + k] = found[k]
        else:
            to_indptr[i + 1] = count
    return longest


@jit
def group_rows(order: IntArray, label: Int32Array, indptr: Int64Array, grouped: IntArray) -> None:
    """Group rows by label, each group in the given order; `indptr` (n_labels + 1) comes in zero."""
    for row in order:
        indptr[label[row] + 1] += 1
    n_labels = len(indptr) - 1
    for k in range(n_labels):
        indptr[k + 1] += indptr[k]
    cursor = indptr[:n_labels].copy()
    for row in order:
        slot = cursor[label[row]]
        grouped[slot] = row
        cursor[label[row]] = slot + 1


@jit
def rows_of_columns(
    indptr: Int64Array, indices: IntArray, to_indptr: Int64Array, to_rows: IntArray
) -> None:
    """Transpose a CSR relation; `to_indptr` (n_columns + 1) comes in zero."""
    for column in indices:
        to_indptr[column + 1] += 1
    n_columns = len(to_indptr) - 1
    for column in range(n_columns):
        to_indptr[column + 1] += to_indptr[column]
    cursor = to_indptr[:n_columns].copy()
    for row in range(len(indptr) - 1):
        for e in range(indptr[row], indptr[row + 1]):
            slot = cursor[indices[e]]
            to_rows[slot] = row
            cursor[indices[e]] = slot + 1


@jit
def sort_pairs(
    owned_indptr: Int64Array,
    owned: IntArray,
    reach_indptr: Int64Array,
    reach_part: Int32Array,
    halo_indptr: Int64Array,
    halo: IntArray,
    halo_owner: Int32Array,
    sent_indptr: Int64Array,
    sent: IntArray,
) -> None:
    """Sort (destination, cell) pairs into halo lists and the owners' send lists.

    `halo` is sorted by (destination, owner, local row of the owner) and `sent`, local rows, by
    (owner, destination, local row); `halo_owner` (n_pairs) is the owner of each halo cell. The
    two `indptr` (n_parts + 1) come in zero and give the rows of each part.
    """
    n_parts = len(owned_indptr) - 1
    for owner in range(n_parts):
        for row in range(owned_indptr[owner], owned_indptr[owner + 1]):
            cell = owned[row]
            for e in range(reach_indptr[cell], reach_indptr[cell + 1]):
                halo_indptr[reach_part[e] + 1] += 1
                sent_indptr[owner + 1] += 1
    for part in range(n_parts):
        halo_indptr[part + 1] += halo_indptr[part]
        sent_indptr[part + 1] += sent_indptr[part]
    local = np.empty(len(halo), sent.dtype)
    cursor = halo_indptr[:n_parts].copy()
    for owner in range(n_parts):
        for row in range(owned_indptr[owner], owned_indptr[owner + 1]):
            cell = owned[row]
            for e in range(reach_indptr[cell], reach_indptr[cell + 1]):
                slot = cursor[reach_part[e]]
                halo[slot] = cell
                halo_owner[slot] = owner
                local[slot] = row - owned_indptr[owner]
                cursor[reach_part[e]] = slot + 1
    cursor = sent_indptr[:n_parts].copy()  # assigning a slice takes 2 s more to compile
    for slot in range(len(halo)):
        owner = halo_owner[slot]
        sent[cursor[owner]] = local[slot]
        cursor[owner] += 1


@jit
def arrange(
    order: IntArray,
    cell_part: Int32Array,
    owned_indptr: Int64Array,
    owned: IntArray,
    reach_indptr: Int64Array,
    reach_part: Int32Array,
    halo_indptr: Int64Array,
    halo: IntArray,
    halo_owner: Int32Array,
    sent_indptr: Int64Array,
    sent: IntArray,
) -> None:
    """Group the cells, then sort the pairs: one kernel, so that one is loaded (20 ms each)."""
    group_rows(order, cell_part, owned_indptr, owned)
    sort_pairs(
        owned_indptr,
        owned,
        reach_indptr,
        reach_part,
        halo_indptr,
        halo,
        halo_owner,
        sent_indptr,
        sent,
    )
