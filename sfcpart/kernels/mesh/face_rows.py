"""Write the rows of the cell graph, from matched faces or from a list of faces between cells.

The words that stand for mates are described in `faces.py` beside this. O(faces); rows are sorted
by insertion, long ones of given faces with widening gaps. For given faces numpy.lexsort of three
keys does the same in 15 times the time (3 million faces in random order).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.mesh.face_match import sort_pairs

__all__ = ["count_given", "count_rows", "fill_rows", "merge_rows", "place_given", "sort_rows"]


@jit
def count_rows(
    start: int,
    stop: int,
    slot_start: Int64Array,
    stride: int,
    face: Int64Array,
    order: Int32Array,
    degree: Int64Array,
    boundary_count: Int32Array,
) -> None:
    """Count the neighbours of cells start..stop into `degree[cell + 1]`, and boundary faces."""
    for cell in range(start, stop):
        many = bare = 0
        first = cell * stride if stride > 0 else slot_start[cell]
        last = first + stride if stride > 0 else slot_start[cell + 1]
        for s in range(first, last):
            mate = face[s, 0]
            many += int(mate >= 0)
            bare += int(mate == -1)
            if mate <= -3:
                at = -3 - mate
                while order[at] >= 0:
                    many += 1
                    at += 1
        degree[cell + 1] = many
        boundary_count[cell] = bare


@jit
def fill_rows(
    start: int,
    stop: int,
    slot_start: Int64Array,
    slot_cell: Int32Array,
    stride: int,
    face: Int64Array,
    measure: FloatArray,
    order: Int32Array,
    indptr: Int64Array,
    indices: Array,
    data: FloatArray,
    boundary_measure: FloatArray,
) -> None:
    """Write rows start..stop of the graph: by neighbour, then by measure."""
    for cell in range(start, stop):
        first = cell * stride if stride > 0 else slot_start[cell]
        last = first + stride if stride > 0 else slot_start[cell + 1]
        end = indptr[cell]
        bare = 0.0
        for s in range(first, last):
            mate = face[s, 0]
            if mate == -1:
                bare += measure[s, 1]
            elif mate != -2:
                at = -3 - mate
                more = True
                while more:
                    t = mate
                    if mate < 0:
                        t = np.int64(order[at])
                        at += 1
                    more = mate < 0 and t >= 0
                    t = t if t >= 0 else ~t
                    if t != s:
                        other: Any = t // stride if stride > 0 else np.int64(slot_cell[t])
                        _insert(indices, data, indptr[cell], end, other, measure[s, 1])
                        end += 1
        boundary_measure[cell] = bare


@jit
def _insert(
    indices: Array, data: FloatArray, first: int, end: int, neighbour: int, size: float
) -> None:
    """Insert one entry into the sorted row first..end."""
    i = end
    while i > first and (
        indices[i - 1] > neighbour or (indices[i - 1] == neighbour and data[i - 1] > size)
    ):
        indices[i] = indices[i - 1]
        data[i] = data[i - 1]
        i -= 1
    indices[i] = neighbour
    data[i] = size


@jit
def count_given(
    cell: Array,
    measure: FloatArray,
    degree: Int64Array,
    boundary_count: Array,
    boundary_measure: FloatArray,
) -> None:
    """Count inner faces of cell c in `degree[c]`; add up those on the boundary in file order."""
    for f in range(len(cell)):
        a, b = cell[f, 0], cell[f, 1]
        if b < 0:
            boundary_count[a] += 1
            boundary_measure[a] += measure[f]
        else:
            degree[a] += 1
            degree[b] += 1


@jit
def place_given(
    cell: Array, measure: FloatArray, place: Int64Array, indices: Array, data: FloatArray
) -> None:
    """Write both entries of each inner face; `place` holds the next free entry of each row."""
    for f in range(len(cell)):
        a, b = cell[f, 0], cell[f, 1]
        if b >= 0:
            indices[place[a]], data[place[a]] = b, measure[f]
            place[a] += 1
            indices[place[b]], data[place[b]] = a, measure[f]
            place[b] += 1


@jit
def sort_rows(start: int, stop: int, indptr: Int64Array, indices: Array, bits: Int64Array) -> None:
    """Sort rows start..stop by neighbour, then by measure; `bits` are measures >= 0 as int64."""
    for row in range(start, stop):
        lo, hi = indptr[row], indptr[row + 1]
        sort_pairs(indices[lo:hi], bits[lo:hi], hi - lo)


@jit
def merge_rows(
    start: int,
    stop: int,
    indptr: Int64Array,
    indices: Array,
    data: FloatArray,
    more_indptr: Int64Array,
    more_place: Int64Array,
    more_data: FloatArray,
    n_low: int,
    to_indices: Array,
    to_data: FloatArray,
) -> None:
    """Merge further entries into rows start..stop, by place of the neighbour, then by measure.

    Places count all known cells: `n_low` ghosts, the cells of the rows, the other ghosts. Entries
    are written with ghosts after the cells of the rows.
    """
    n = len(indptr) - 1
    for row in range(start, stop):
        at, more = indptr[row], more_indptr[row]
        for to in range(at + more, indptr[row + 1] + more_indptr[row + 1]):
            takes_more = more < more_indptr[row + 1]
            if takes_more and at < indptr[row + 1]:
                place = indices[at] + n_low
                takes_more = more_place[more] < place or (
                    more_place[more] == place and more_data[more] < data[at]
                )
            if takes_more:
                place = more_place[more]
                to_indices[to] = place + n if place < n_low else place
                if n_low <= place < n_low + n:
                    to_indices[to] = place - n_low
                to_data[to] = more_data[more]
                more += 1
            else:
                to_indices[to] = indices[at]
                to_data[to] = data[at]
                at += 1
