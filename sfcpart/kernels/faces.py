"""Match the faces of cells and write the cell graph.

A *slot* is one face of one cell; slots are numbered cell by cell. A face is the set of its
distinct corners. Every slot makes an entry of two int64: (second smallest corner, third) and
(fourth, slot, twist), in the bucket of its smallest corner (a counting sort). Each bucket is
sorted, equal neighbours are mates. Nothing is hashed, so nothing is left to chance.

Steps: `count_faces` -> `place_buckets` -> `fill_entries` -> `match_faces` -> `count_rows` ->
`fill_rows`. Memory: 20 bytes a slot (16 of them until the mates are known), then 12 an entry of
the graph. The mate of a slot is another slot, or one of

    -1  boundary: no other cell has this face;
    -2  no face: fewer distinct corners than a face needs, or both sides are the same cell;
    -3 - i  the face belongs to the group that begins at entry i: more than two cells, or cells
        that run around the same corners in different turn.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.cells import CellArrays

__all__ = [
    "BOUNDARY",
    "NO_FACE",
    "SLOT_LIMIT",
    "count_faces",
    "count_rows",
    "fill_entries",
    "fill_rows",
    "match_faces",
    "place_buckets",
]

BOUNDARY, NO_FACE, GROUP = -1, -2, -3
SLOT_LIMIT = 1 << 30
_LARGE = 3
_SMALL_BUCKET = 48


@jit
def _load_face(c: int, f: int, cells: CellArrays, ring: Int64Array) -> int:
    """Write the distinct corners of face f of cell c to `ring`, in turn; return their number."""
    k = cells.kind[c]
    row = cells.indptr[c]
    n = 0
    if k == 42:
        face = cells.poly_cell_indices[cells.poly_cell_indptr[c] + f]
        for i in range(cells.poly_face_indptr[face], cells.poly_face_indptr[face + 1]):
            n = _add(ring, n, cells.poly_face_indices[i])
    elif cells.face_count[k] == 0:
        n = _add(ring, n, cells.indices[row + f])
        last = row + f + 1 == cells.indptr[c + 1]
        n = _add(ring, n, cells.indices[row if last else row + f + 1])
    else:
        for i in range(cells.face_size[k, f]):
            n = _add(ring, n, cells.indices[row + cells.face_corner[k, f, i]])
    return n


@jit
def _add(ring: Int64Array, n: int, point: int) -> int:
    """Append a point that is not there yet; return the new length."""
    for i in range(n):
        if ring[i] == point:
            return n
    ring[n] = point
    return n + 1


@jit
def _rank_face(ring: Int64Array, n: int) -> tuple[Any, Any, Any, Any, int]:
    """Return the four smallest corners in order (0 for none) and the twist of a face.

    The twist of four corners is the rank of the one opposite the smallest. More than four corners
    have twist 3, and bit 31 set in the third, so that they never equal a smaller face.
    """
    a = b = c = d = np.int64(1 << 40)
    at = 0
    for i in range(n):
        p = ring[i]
        if p < a:
            a, b, c, d = p, a, b, c
            at = i
        elif p < b:
            b, c, d = p, b, c
        elif p < c:
            c, d = p, c
        elif p < d:
            d = p
    if n == 4:
        across = ring[(at + 2) % 4]
        return a, b, c, d, (0 if across == b else 1 if across == c else 2)
    if n > 4:
        return a, b, c | 1 << 31, d, 3
    return a, b, (c if n > 2 else np.int64(0)), np.int64(0), 0


@jit
def _slot_start(c: int, stride: int, slot_start: Array) -> int:
    """First slot of cell c: a product where all cells have `stride` faces, else looked up."""
    return c * stride if stride > 0 else slot_start[c]


@jit
def count_faces(
    start: int,
    stop: int,
    bounds: Int64Array,
    cells: CellArrays,
    least: int,
    stride: int,
    slot_start: Array,
    longest: int,
    count: Int32Array,
) -> None:
    """Count the faces of cells bounds[r]..bounds[r+1] by smallest corner into row r of `count`."""
    ring = np.empty(longest, np.int64)
    for r in range(start, stop):
        for c in range(bounds[r], bounds[r + 1]):
            n_faces = _slot_start(c + 1, stride, slot_start) - _slot_start(c, stride, slot_start)
            for f in range(n_faces):
                n = _load_face(c, f, cells, ring)
                if n >= least:
                    a = ring[0]
                    for i in range(1, n):
                        a = min(a, ring[i])
                    count[r, a] += 1


@jit
def place_buckets(count: Int32Array, bucket: Int32Array) -> None:
    """Turn counts into places: `bucket` gets the first entry of each point, `count` each row's."""
    total = 0
    for p in range(count.shape[1]):
        bucket[p] = total
        for r in range(count.shape[0]):
            here = count[r, p]
            count[r, p] = total
            total += here
    bucket[count.shape[1]] = total


@jit
def fill_entries(
    start: int,
    stop: int,
    bounds: Int64Array,
    cells: CellArrays,
    least: int,
    stride: int,
    slot_start: Array,
    longest: int,
    place: Int32Array,
    entry: Int64Array,
    mate: Int32Array,
) -> None:
    """Put the entry of each face into its bucket; mark slots that are no faces."""
    ring = np.empty(longest, np.int64)
    for r in range(start, stop):
        for cell in range(bounds[r], bounds[r + 1]):
            slot = _slot_start(cell, stride, slot_start)
            for f in range(_slot_start(cell + 1, stride, slot_start) - slot):
                n = _load_face(cell, f, cells, ring)
                if n < least:
                    mate[slot + f] = -2
                    continue
                a, b, c, d, twist = _rank_face(ring, n)
                at = place[r, a]
                place[r, a] = at + 1
                entry[at, 0] = b << 32 | c
                entry[at, 1] = d << 32 | (slot + f) << 2 | twist


@jit
def match_faces(
    start: int,
    stop: int,
    bounds: Int64Array,
    bucket: Int32Array,
    cells: CellArrays,
    stride: int,
    slot_start: Array,
    slot_cell: Array,
    longest: int,
    entry: Int64Array,
    mate: Int32Array,
) -> int:
    """Sort the buckets of points bounds[r]..bounds[r+1] and write mates; return groups found."""
    ring, other = np.empty(longest, np.int64), np.empty(longest, np.int64)
    groups = 0
    for r in range(start, stop):
        for p in range(bounds[r], bounds[r + 1]):
            lo, hi = bucket[p], bucket[p + 1]
            if hi - lo <= 48:
                _insertion_sort(entry, lo, hi)
            else:
                _heap_sort(entry, lo, hi)
            i = lo
            while i < hi:
                j = i + 1
                while (
                    j < hi and entry[j, 0] == entry[i, 0] and entry[j, 1] >> 32 == entry[i, 1] >> 32
                ):
                    j += 1
                groups += _match_run(
                    i, j, cells, stride, slot_start, slot_cell, ring, other, entry, mate
                )
                i = j
    return groups


@jit
def _insertion_sort(entry: Int64Array, lo: int, hi: int) -> None:
    """Sort entries lo..hi (few of them)."""
    for i in range(lo + 1, hi):
        x, y = entry[i, 0], entry[i, 1]
        j = i
        while j > lo and (entry[j - 1, 0] > x or (entry[j - 1, 0] == x and entry[j - 1, 1] > y)):
            entry[j, 0] = entry[j - 1, 0]
            entry[j, 1] = entry[j - 1, 1]
            j -= 1
        entry[j, 0] = x
        entry[j, 1] = y


@jit
def _heap_sort(entry: Int64Array, lo: int, hi: int) -> None:
    """Sort entries lo..hi in O(n log n): a point may have very many faces."""
    n = hi - lo
    begin, end = n // 2, n
    while end > 1:
        if begin > 0:
            begin -= 1
            x, y = entry[lo + begin, 0], entry[lo + begin, 1]
        else:
            end -= 1
            x, y = entry[lo + end, 0], entry[lo + end, 1]
            entry[lo + end, 0] = entry[lo, 0]
            entry[lo + end, 1] = entry[lo, 1]
        hole = begin
        child = 2 * hole + 1
        while child < end:
            u = lo + child
            if child + 1 < end and (
                entry[u + 1, 0] > entry[u, 0]
                or (entry[u + 1, 0] == entry[u, 0] and entry[u + 1, 1] > entry[u, 1])
            ):
                u += 1
                child += 1
            if entry[u, 0] < x or (entry[u, 0] == x and entry[u, 1] <= y):
                break
            entry[lo + hole, 0] = entry[u, 0]
            entry[lo + hole, 1] = entry[u, 1]
            hole = child
            child = 2 * hole + 1
        entry[lo + hole, 0] = x
        entry[lo + hole, 1] = y


@jit
def _slot(word: int) -> int:
    """Slot of an entry, from its second word."""
    return (word & 0xFFFFFFFF) >> 2


@jit
def _cell(slot: int, stride: int, slot_cell: Array) -> int:
    """Cell of a slot."""
    return slot // stride if stride > 0 else slot_cell[slot]


@jit
def _match_run(
    i: int,
    j: int,
    cells: CellArrays,
    stride: int,
    slot_start: Array,
    slot_cell: Array,
    ring: Int64Array,
    other: Int64Array,
    entry: Int64Array,
    mate: Int32Array,
) -> int:
    """Give mates to entries i..j, whose four smallest corners agree; return groups found."""
    if j - i == 1:
        mate[_slot(entry[i, 1])] = -1
        return 0
    large = entry[i, 1] & 3 == 3
    groups = 0
    while i < j:
        end = j
        if large:
            end = _gather_equal(i, j, cells, stride, slot_start, slot_cell, ring, other, entry)
        groups += _group(i, end, stride, slot_cell, entry, mate)
        i = end
    return groups


@jit
def _gather_equal(
    i: int,
    j: int,
    cells: CellArrays,
    stride: int,
    slot_start: Array,
    slot_cell: Array,
    ring: Int64Array,
    other: Int64Array,
    entry: Int64Array,
) -> int:
    """Move the entries with the corners of entry i right behind it; mark turns that differ."""
    s = _slot(entry[i, 1])
    c = _cell(s, stride, slot_cell)
    n = _load_face(c, s - _slot_start(c, stride, slot_start), cells, ring)
    end = i + 1
    for at in range(i + 1, j):
        t = _slot(entry[at, 1])
        c = _cell(t, stride, slot_cell)
        m = _load_face(c, t - _slot_start(c, stride, slot_start), cells, other)
        if m != n:
            continue
        for u in range(n):
            m = _add(ring, m, other[u])
        if m == n:
            word = entry[at, 1]
            if _same_turn(ring, other, n):
                word &= ~3
            for u in range(at, end, -1):
                entry[u, 1] = entry[u - 1, 1]
            entry[end, 1] = word
            end += 1
    entry[i, 1] &= ~3
    return end


@jit
def _same_turn(ring: Int64Array, other: Int64Array, n: int) -> bool:
    """Tell whether two rings of the same corners are the same polygon, either way round."""
    at = 0
    while other[at] != ring[0]:
        at += 1
    ahead, back = True, True
    for i in range(n):
        ahead &= ring[i] == other[(at + i) % n]
        back &= ring[i] == other[(at + n - i) % n]
    return ahead or back


@jit
def _group(
    i: int, j: int, stride: int, slot_cell: Array, entry: Int64Array, mate: Int32Array
) -> int:
    """Make entries i..j, one face, a group of distinct cells; a cell's second slot is no face."""
    if j - i == 1:
        mate[_slot(entry[i, 1])] = -1
        return 0
    if j - i == 2 and (entry[i, 1] & 3) == (entry[i + 1, 1] & 3):
        s, t = _slot(entry[i, 1]), _slot(entry[i + 1, 1])
        if _cell(s, stride, slot_cell) != _cell(t, stride, slot_cell):
            mate[s] = t
            mate[t] = s
            return 0
    end = i
    last = -1
    for at in range(i, j):
        s = _slot(entry[at, 1])
        c = _cell(s, stride, slot_cell)
        mate[s] = -2
        if c != last:
            entry[end, 1] = entry[at, 1]
            end += 1
        last = c
    if end - i == 1:
        return 0
    for at in range(i, end):
        mate[_slot(entry[at, 1])] = -3 - i
    entry[i, 0] = end - i
    return 1


@jit
def count_rows(
    start: int,
    stop: int,
    stride: int,
    slot_start: Array,
    entry: Int64Array,
    mate: Int32Array,
    degree: Int64Array,
    boundary_count: Int32Array,
) -> None:
    """Count the neighbours of cells start..stop into `degree[cell + 1]`, and boundary faces."""
    for c in range(start, stop):
        many = bare = 0
        for slot in range(
            _slot_start(c, stride, slot_start), _slot_start(c + 1, stride, slot_start)
        ):
            m = mate[slot]
            if m >= 0:
                many += 1
            elif m == -1:
                bare += 1
            elif m <= -3:
                many += entry[-3 - m, 0] - 1
        degree[c + 1] = many
        boundary_count[c] = bare


@jit
def fill_rows(
    start: int,
    stop: int,
    points: FloatArray,
    cells: CellArrays,
    stride: int,
    slot_start: Array,
    slot_cell: Array,
    longest: int,
    entry: Int64Array,
    mate: Int32Array,
    indptr: Int64Array,
    indices: Array,
    data: FloatArray,
    boundary_measure: FloatArray,
) -> None:
    """Write rows start..stop of the graph: neighbours and measures, by neighbour, then measure."""
    ring = np.empty(longest, np.int64)
    for c in range(start, stop):
        slot = _slot_start(c, stride, slot_start)
        first = end = indptr[c]
        bare = 0.0
        for f in range(_slot_start(c + 1, stride, slot_start) - slot):
            m = mate[slot + f]
            if m == -2:
                continue
            if m >= -1:
                size = _face_measure(points, ring, _load_face(c, f, cells, ring))
                if m == -1:
                    bare += size
                else:
                    _insert(indices, data, first, end, _cell(m, stride, slot_cell), size)
                    end += 1
                continue
            # a group is measured by its first slot, whoever asks
            at = -3 - m
            s = _slot(entry[at, 1])
            owner = _cell(s, stride, slot_cell)
            n = _load_face(owner, s - _slot_start(owner, stride, slot_start), cells, ring)
            size = _face_measure(points, ring, n)
            for i in range(at, at + entry[at, 0]):
                neighbour = _cell(_slot(entry[i, 1]), stride, slot_cell)
                if neighbour != c:
                    _insert(indices, data, first, end, neighbour, size)
                    end += 1
        boundary_measure[c] = bare


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
def _face_measure(points: FloatArray, ring: Int64Array, n: int) -> float:
    """Length, or norm of the vector area, of a face with n distinct corners.

    The corners are taken from the smallest on towards its smaller neighbour, so that the result
    has the same bits whichever cell asks.
    """
    at = 0
    for i in range(1, n):
        if ring[i] < ring[at]:
            at = i
    after, before = (at + 1) % n, (at + n - 1) % n
    step = 1 if ring[after] <= ring[before] else n - 1
    third = points.shape[1] == 3
    o = ring[at]
    ax = ay = az = 0.0
    nx = ny = nz = 0.0
    i = at
    for _ in range(n - 1):
        i = (i + step) % n
        p = ring[i]
        bx = points[p, 0] - points[o, 0]
        by = points[p, 1] - points[o, 1]
        bz = points[p, 2] - points[o, 2] if third else 0.0
        if n == 2:
            nx, ny, nz = 2.0 * bx, 2.0 * by, 2.0 * bz
        else:
            nx += ay * bz - az * by
            ny += az * bx - ax * bz
            nz += ax * by - ay * bx
        ax, ay, az = bx, by, bz
    measure: float = 0.5 * np.sqrt(nx * nx + ny * ny + nz * nz)
    return measure
