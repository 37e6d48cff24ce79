"""Loops behind the figures of a partition: cut faces, sums of parts, pairs of parts.

All but `find_pairs` stream over ranges of cells. Sums per part are whole numbers (`sum_parts`), so
that they cannot depend on the number of threads. Every kernel is linear in cells plus entries of
the cell graph.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import FloatArray, Int32Array, Int64Array, IntArray
from sfcpart.kernels._jit import jit

__all__ = [
    "count_cuts",
    "count_off_lattice",
    "find_pairs",
    "sum_parts",
]


@jit
def count_cuts(
    start: int,
    stop: int,
    indptr: Int64Array,
    indices: IntArray,
    data: FloatArray,
    cell_part: Int32Array,
    cut_count: Int32Array,
    cut_measure: FloatArray,
) -> None:
    """Write the faces of each cell that lead to another part, and their measure."""
    for i in range(start, stop):
        part = cell_part[i]
        count = 0
        measure = 0.0
        for entry in range(indptr[i], indptr[i + 1]):
            if cell_part[indices[entry]] != part:
                count += 1
                measure += data[entry]
        cut_count[i] = count
        cut_measure[i] = measure


@jit
def sum_parts(
    start: int,
    stop: int,
    bounds: Int64Array,
    cell_part: Int32Array,
    values: tuple[FloatArray, ...],
    factor: FloatArray,
    low_unit: float,
    counts: tuple[Int32Array, ...],
    centers: FloatArray,
    total: Int64Array,
    low: FloatArray,
    high: FloatArray,
) -> None:
    """Sum values and counts of the cells of each part; box their centres.

    Block r takes cells bounds[r]..bounds[r+1] and adds to row r of the results. `total` has for
    each part the cells, the counts, and two words of each value (`sfcpart.slices.fixed`): units of
    1 / factor, and the rest in units finer by `low_unit`. An empty array among values and counts
    stands for one that is not known; its sums stay as they are.
    """
    n_axes = centers.shape[1]
    n_counts = len(counts)
    for r in range(start, stop):
        for i in range(bounds[r], bounds[r + 1]):
            part = cell_part[i]
            total[r, part, 0] += 1
            for k in range(n_counts):
                if len(counts[k]) > 0:
                    total[r, part, 1 + k] += counts[k][i]
            for k in range(len(values)):
                if len(values[k]) > 0:
                    scaled = values[k][i] * factor[k]
                    word = np.int64(scaled)
                    total[r, part, 1 + n_counts + 2 * k] += word
                    total[r, part, 2 + n_counts + 2 * k] += np.int64((scaled - word) * low_unit)
            for k in range(n_axes):
                x = centers[i, k]
                low[r, part, k] = min(low[r, part, k], x)
                high[r, part, k] = max(high[r, part, k], x)


@jit
def find_pairs(
    edge_cells: Int64Array,
    indptr: Int64Array,
    indices: IntArray,
    cell_part: Int32Array,
    part_start: Int64Array,
    capacity: int,
) -> tuple[Int32Array, Int32Array, Int64Array, Int64Array]:
    """Find which parts meet, in how many faces, and how many distinct cells each owns there.

    `part_start` says where the cut entries of each part begin; returned are the part, the other
    part, the faces and the cells of the part that touch the other, one row for each ordered pair.
    """
    n_parts = len(part_start) - 1
    other = np.empty(part_start[n_parts], np.int32)
    cursor = part_start[:n_parts].copy()
    seen = np.full(n_parts, -1, np.int64)
    for i in edge_cells:
        part = cell_part[i]
        at = cursor[part]
        for entry in range(indptr[i], indptr[i + 1]):
            q = cell_part[indices[entry]]
            if q != part:
                # The first face of this cell towards q is marked by the sign: a distinct cell.
                other[at] = q if seen[q] == i else -1 - q
                seen[q] = i
                at += 1
        cursor[part] = at
    pair_part = np.empty(capacity, np.int32)
    pair_other = np.empty(capacity, np.int32)
    pair_faces = np.zeros(capacity, np.int64)
    pair_cells = np.zeros(capacity, np.int64)
    slot = np.full(n_parts, -1, np.int64)
    n_pairs = 0
    for part in range(n_parts):
        first = n_pairs
        for at in range(part_start[part], part_start[part + 1]):
            q = other[at]
            is_new_cell = q < 0
            if is_new_cell:
                q = -1 - q
            if slot[q] < first:
                slot[q] = n_pairs
                pair_part[n_pairs] = part
                pair_other[n_pairs] = q
                n_pairs += 1
            pair_faces[slot[q]] += 1
            if is_new_cell:
                pair_cells[slot[q]] += 1
    return pair_part[:n_pairs], pair_other[:n_pairs], pair_faces[:n_pairs], pair_cells[:n_pairs]


@jit
def count_off_lattice(
    start: int,
    stop: int,
    indptr: Int64Array,
    indices: IntArray,
    centers: FloatArray,
    origin: FloatArray,
    spacing: float,
    tolerance: float,
    sides: Int64Array,
    site: Int64Array,
) -> int:
    """Write the sites of a range of cells; count what does not fit a lattice.

    Counted are cells off the sites, and entries that do not join two sites one step apart along
    one axis, or join them again.
    """
    n_bad = 0
    scale = 1.0 / spacing  # 18 divisions a cube would take as long as the rest
    for i in range(start, stop):
        place = np.int64(0)
        for k in range(len(sides)):
            steps = (centers[i, k] - origin[k]) * scale
            nearest = np.rint(steps)
            if abs(steps - nearest) > tolerance * max(1.0, steps):
                n_bad += 1
            place = place * sides[k] + min(max(np.int64(nearest), 0), sides[k] - 1)
        site[i] = place
        for entry in range(indptr[i], indptr[i + 1]):
            j = indices[entry]
            apart = 0.0
            for k in range(len(sides)):
                apart += abs(centers[i, k] - centers[j, k])
            is_repeated = False
            for earlier in range(indptr[i], entry):
                is_repeated |= indices[earlier] == j
            if np.rint(apart * scale) != 1.0 or is_repeated:
                n_bad += 1
    return n_bad
