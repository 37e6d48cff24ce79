"""Match the faces of cells and write the cell graph.

A *slot* is one face of one cell; slots are numbered cell by cell. Faces are equal if they have the
same distinct corners. `list_faces` writes every face as two words: its four smallest corners and
how it turns through them. A counting sort (`place_buckets`, `fill_buckets`) gathers the slots with
the same smallest corner, `match_faces` sorts each bucket and joins equal neighbours, `count_rows`
and `fill_rows` write the graph. Nothing is hashed, so nothing is left to chance. Memory: 20 bytes
a slot and 12 an entry of the graph.

The words of slot s, corners a < b < c < d (0 where there is none, ids below 2**30):

    before matching   face[s] = (a << 32 | b,  c << 32 | d << 2 | turn)
    after matching    face[s] = (mate, bits of the measure as float64)

`turn` is the rank among b, c, d of the corner opposite a in a ring of four. Faces with more than
four corners have turn 3, bit 30 set in c, and instead of d their row in the table of large faces.
The mate is the slot of the same face in the other cell, or

    -1      boundary: no other slot has this face;
    -2      no face: fewer distinct corners than a face needs, or all its sides in one cell;
    -3 - i  more than two cells meet here: their slots stand in `order` from i on, the last one
            as its complement ~slot.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.cells import CellArrays

__all__ = [
    "ID_LIMIT",
    "count_rows",
    "fill_buckets",
    "fill_rows",
    "list_faces",
    "list_tetra_faces",
    "match_faces",
    "place_buckets",
    "sort_pairs",
]

ID_LIMIT = 1 << 30
_LOW = 0xFFFFFFFF


@jit
def list_tetra_faces(
    start: int,
    stop: int,
    bounds: Int64Array,
    tetra: Array,
    face: Int64Array,
    count: Int32Array,
) -> None:
    """List the faces of tetrahedra bounds[r]..bounds[r+1]; count smallest corners in row r."""
    for r in range(start, stop):
        for t in range(bounds[r], bounds[r + 1]):
            a, b = np.int64(tetra[t, 0]), np.int64(tetra[t, 1])
            c, d = np.int64(tetra[t, 2]), np.int64(tetra[t, 3])
            if a > b:
                a, b = b, a
            if c > d:
                c, d = d, c
            if a > c:
                a, c = c, a
            if b > d:
                b, d = d, b
            if b > c:
                b, c = c, b
            s = 4 * t
            face[s, 0] = a << 32 | b if a < b < c else -2
            face[s, 1] = c << 32
            face[s + 1, 0] = a << 32 | b if a < b < d else -2
            face[s + 1, 1] = d << 32
            face[s + 2, 0] = a << 32 | c if a < c < d else -2
            face[s + 2, 1] = d << 32
            face[s + 3, 0] = b << 32 | c if b < c < d else -2
            face[s + 3, 1] = d << 32
            count[r, a] += int(a < b < c) + int(a < b < d) + int(a < c < d)
            count[r, b] += int(b < c < d)


@jit
def list_faces(
    start: int,
    stop: int,
    bounds: Int64Array,
    cells: CellArrays,
    least: int,
    longest: int,
    slot_start: Int64Array,
    stride: int,
    face: Int64Array,
    count: Int32Array,
) -> None:
    """List the faces of cells bounds[r]..bounds[r+1] of any kinds; count smallest corners.

    A face has at least `least` distinct corners; none is longer than `longest`.
    """
    ring = np.empty(longest, np.int64)
    for r in range(start, stop):
        for cell in range(bounds[r], bounds[r + 1]):
            k = cells.kind[cell]
            row = cells.indptr[cell]
            n_faces = np.int64(cells.face_count[k])
            s = cell * stride if stride > 0 else slot_start[cell]
            if n_faces == 0:
                n_faces = slot_start[cell + 1] - s
            for f in range(n_faces):
                n = np.int64(0)
                row_of_large = np.int64(0)
                if k == 42:
                    row_of_large = cells.poly_cell_indices[cells.poly_cell_indptr[cell] + f]
                    lo = cells.poly_face_indptr[row_of_large]
                    for i in range(lo, cells.poly_face_indptr[row_of_large + 1]):
                        n = _add(ring, n, cells.poly_face_indices[i])
                elif cells.face_count[k] == 0:
                    n = _add(ring, n, cells.indices[row + f])
                    n = _add(ring, n, cells.indices[row + f + 1 if f + 1 < n_faces else row])
                else:
                    for i in range(cells.face_size[k, f]):
                        n = _add(ring, n, cells.indices[row + cells.face_corner[k, f, i]])
                if n < least:
                    face[s + f, 0] = -2
                else:
                    count[r, _write_face(ring, n, row_of_large, s + f, face)] += 1


@jit
def _add(ring: Int64Array, n: int, point: int) -> int:
    """Append a corner that is not there yet; return the new length."""
    for i in range(n):
        if ring[i] == point:
            return n
    ring[n] = point
    return n + 1


@jit
def _write_face(ring: Int64Array, n: int, row_of_large: int, s: int, face: Int64Array) -> int:
    """Write the words of slot s; return the smallest corner."""
    none = np.int64(1 << 40)
    a, b, c, d = none, none, none, none
    at = 0
    for i in range(n):
        p = ring[i]
        if p < a:
            a, b, c, d, at = p, a, b, c, i
        elif p < b:
            b, c, d = p, b, c
        elif p < c:
            c, d = p, c
        elif p < d:
            d = p
    face[s, 0] = a << 32 | b
    if n == 2:
        face[s, 1] = 0
    elif n == 3:
        face[s, 1] = c << 32
    elif n == 4:
        across = ring[(at + 2) & 3]
        face[s, 1] = c << 32 | d << 2 | (0 if across == b else 1 if across == c else 2)
    else:
        face[s, 1] = (c | 1 << 30) << 32 | row_of_large << 2 | 3
    return a


@jit
def place_buckets(count: Int32Array, bucket: Int32Array) -> int:
    """Turn counts into places: `bucket` begins each point's slots, `count` each row's share.

    Returns the size of the largest bucket.
    """
    total = largest = 0
    for p in range(count.shape[1]):
        bucket[p] = total
        for r in range(count.shape[0]):
            here = count[r, p]
            count[r, p] = total
            total += here
        largest = max(largest, total - bucket[p])
    bucket[count.shape[1]] = total
    return largest


@jit
def fill_buckets(
    start: int,
    stop: int,
    bounds: Int64Array,
    face: Int64Array,
    place: Int32Array,
    order: Int32Array,
) -> None:
    """Put slots bounds[r]..bounds[r+1] into their buckets."""
    for r in range(start, stop):
        for s in range(bounds[r], bounds[r + 1]):
            if face[s, 0] >= 0:
                a = face[s, 0] >> 32
                order[place[r, a]] = s
                place[r, a] += 1


@jit
def match_faces(
    start: int,
    stop: int,
    bounds: Int64Array,
    bucket: Int32Array,
    largest: int,
    points: FloatArray,
    large_indptr: Int64Array,
    large_indices: Array,
    slot_cell: Int32Array,
    stride: int,
    face: Int64Array,
    measure: FloatArray,
    order: Int32Array,
) -> None:
    """Find the mates and measures of slots in the buckets of points bounds[r]..bounds[r+1].

    `measure` is `face` seen as float64.
    """
    key = np.empty(largest, np.int64)
    tail = np.empty(largest, np.int64)
    for r in range(start, stop):
        for p in range(bounds[r], bounds[r + 1]):
            lo = bucket[p]
            n = bucket[p + 1] - lo
            for i in range(n):
                s = np.int64(order[lo + i])
                key[i] = face[s, 0] << 32 | face[s, 1] >> 32
                d = (face[s, 1] & _LOW) >> 2
                tail[i] = s if face[s, 1] & 3 == 3 else d << 32 | s
            sort_pairs(key, tail, n)
            i = np.int64(0)  # a bare 0 would compile callees twice
            while i < n:
                s = tail[i] & _LOW
                size = _face_size(points, large_indptr, large_indices, face[s, 0], face[s, 1])
                j = i + 1
                while j < n and key[j] == key[i] and tail[j] >> 32 == tail[i] >> 32:
                    j += 1
                if j > i + 1 and face[s, 1] & 3 == 3:
                    j = _gather_equal(i, j, large_indptr, large_indices, face, tail)
                _join(i, j, lo, size, slot_cell, stride, tail, face, measure, order)
                i = j


@jit
def sort_pairs(key: Array, tail: Array, n: int) -> None:
    """Sort pairs: by insertion, with Shell's widening gaps where a point has very many faces."""
    gap = 1
    while 27 * gap < n:
        gap = 3 * gap + 1
    while gap > 0:
        for i in range(gap, n):
            x, y = key[i], tail[i]
            j = i
            while j >= gap and (key[j - gap] > x or (key[j - gap] == x and tail[j - gap] > y)):
                key[j], tail[j] = key[j - gap], tail[j - gap]
                j -= gap
            key[j], tail[j] = x, y
        gap //= 3


@jit
def _face_size(
    points: FloatArray, large_indptr: Int64Array, large_indices: Array, first: int, second: int
) -> float:
    """Length of an edge, area of a triangle, norm of the vector area of a larger face."""
    a, b = first >> 32, first & _LOW
    c, d, turn = second >> 32, (second & _LOW) >> 2, second & 3
    third = points.shape[1] == 3
    ux, uy = points[b, 0] - points[a, 0], points[b, 1] - points[a, 1]
    uz = points[b, 2] - points[a, 2] if third else 0.0
    if c == 0:
        return np.sqrt(ux * ux + uy * uy + uz * uz)
    nx = ny = nz = 0.0
    if turn == 3:
        o = np.int64(large_indices[large_indptr[d]])
        px = py = pz = 0.0
        for i in range(large_indptr[d] + 1, large_indptr[d + 1]):
            p = large_indices[i]
            qx, qy = points[p, 0] - points[o, 0], points[p, 1] - points[o, 1]
            qz = points[p, 2] - points[o, 2] if third else 0.0
            nx += py * qz - pz * qy
            ny += pz * qx - px * qz
            nz += px * qy - py * qx
            px, py, pz = qx, qy, qz
    else:
        # a triangle a, b, c, or the diagonals of a ring of four
        v0, v1 = a, c
        if d > 0 and turn == 0:
            v0, v1 = c, d
        elif d > 0:
            v1 = d
            if turn == 1:
                ux, uy = points[c, 0] - points[a, 0], points[c, 1] - points[a, 1]
                uz = points[c, 2] - points[a, 2] if third else 0.0
                v0 = b
            else:
                ux, uy = points[d, 0] - points[a, 0], points[d, 1] - points[a, 1]
                uz = points[d, 2] - points[a, 2] if third else 0.0
                v0, v1 = b, c
        vx, vy = points[v1, 0] - points[v0, 0], points[v1, 1] - points[v0, 1]
        vz = points[v1, 2] - points[v0, 2] if third else 0.0
        nx, ny, nz = uy * vz - uz * vy, uz * vx - ux * vz, ux * vy - uy * vx
    size: float = 0.5 * np.sqrt(nx * nx + ny * ny + nz * nz)
    return size


@jit
def _gather_equal(
    i: int,
    j: int,
    large_indptr: Int64Array,
    large_indices: Array,
    face: Int64Array,
    tail: Int64Array,
) -> int:
    """Move the large faces i..j with the corners of the first right behind it, in slot order."""
    f = (face[tail[i], 1] & _LOW) >> 2
    end = i + 1
    for at in range(i + 1, j):
        s = tail[at]
        g = (face[s, 1] & _LOW) >> 2
        if f == g or (
            _holds(f, g, large_indptr, large_indices) and _holds(g, f, large_indptr, large_indices)
        ):
            for u in range(at, end, -1):
                tail[u] = tail[u - 1]
            tail[end] = s
            end += 1
    return end


@jit
def _holds(f: int, g: int, large_indptr: Int64Array, large_indices: Array) -> bool:
    """Tell whether large face f has all corners of large face g."""
    for j in range(large_indptr[g], large_indptr[g + 1]):
        found = False
        for i in range(large_indptr[f], large_indptr[f + 1]):
            found = found or large_indices[i] == large_indices[j]
        if not found:
            return False
    return True


@jit
def _join(
    i: int,
    j: int,
    lo: int,
    size: float,
    slot_cell: Int32Array,
    stride: int,
    tail: Int64Array,
    face: Int64Array,
    measure: FloatArray,
    order: Int32Array,
) -> None:
    """Write mate and measure of the slots i..j of one face."""
    n = 0
    last = np.int64(-1)
    for at in range(i, j):
        s = tail[at] & _LOW
        cell = s // stride if stride > 0 else np.int64(slot_cell[s])
        face[s, 0] = -2
        if cell != last:
            order[lo + i + n] = s
            n += 1
        last = cell
    s = np.int64(order[lo + i])
    if j - i == 1:
        face[s, 0] = -1
        measure[s, 1] = size
    elif n == 2:
        t = np.int64(order[lo + i + 1])
        face[s, 0], face[t, 0] = t, s
        measure[s, 1], measure[t, 1] = size, size
    elif n > 2:
        for at in range(n):
            s = np.int64(order[lo + i + at])
            face[s, 0] = -3 - (lo + i)
            measure[s, 1] = size
        order[lo + i + n - 1] = ~s


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
                        other = t // stride if stride > 0 else np.int64(slot_cell[t])
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
