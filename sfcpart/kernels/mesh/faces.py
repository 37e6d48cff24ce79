"""List the faces of cells in two words each (first step of the cell graph).

A *slot* is one face of one cell; slots are numbered cell by cell. Faces are equal if they have the
same distinct corners. `list_faces` writes every face as two words: its four smallest corners and
how it turns through them. A counting sort gathers the slots with the same smallest corner, each
bucket is sorted and equal neighbours are joined (`face_match`), and the rows of the graph are
written (`face_rows`). Nothing is hashed, so nothing is left to chance. Memory: 20 bytes a slot and
12 an entry of the graph.

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

from typing import Any

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.mesh.cells import CellArrays

__all__ = ["ID_LIMIT", "list_faces", "list_tetra_faces"]

ID_LIMIT = 1 << 30
"""Points and slots must number fewer: two bits of 32 hold the turn of a face."""


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
                n: Any = np.int64(0)
                row_of_large: Any = np.int64(0)
                if k == 42:
                    row_of_large = cells.poly_cell_indices[cells.poly_cell_indptr[cell] + f]
                    lo = cells.poly_face_indptr[row_of_large]
                    for i in range(lo, cells.poly_face_indptr[row_of_large + 1]):
                        n = _add(ring, n, cells.poly_face_indices[i])
                elif cells.face_count[k] == 0:
                    n = _add(ring, n, cells.indices[row + f])
                    n = _add(ring, n, cells.indices[row + f + 1 if f + 1 < n_faces else row])
                else:
                    if cells.face_size[k, f] == 4:
                        a = _write_ring(cells.indices, row, cells.face_corner[k, f], s + f, face)
                        if a >= 0:
                            count[r, a] += 1
                            continue
                    for i in range(cells.face_size[k, f]):
                        n = _add(ring, n, cells.indices[row + cells.face_corner[k, f, i]])
                if n < least:
                    face[s + f, 0] = -2
                else:
                    count[r, _write_face(ring, n, row_of_large, s + f, face)] += 1


@jit
def _write_ring(indices: Array, row: int, corner: Array, s: int, face: Int64Array) -> Any:
    """Write the words of a face with four distinct corners; return the smallest, or -1.

    What `_write_face` does, in less than half of its time.
    """
    p, q = np.int64(indices[row + corner[0]]), np.int64(indices[row + corner[1]])
    o, r = np.int64(indices[row + corner[2]]), np.int64(indices[row + corner[3]])
    a, b, c, across = p, q, r, o
    if q < a:
        a, b, c, across = q, o, p, r
    if o < a:
        a, b, c, across = o, r, q, p
    if r < a:
        a, b, c, across = r, p, o, q
    if b > c:
        b, c = c, b
    turn = np.int64(0)
    if across > c:
        d, turn = across, np.int64(2)
    elif across > b:
        c, d, turn = across, c, np.int64(1)
    else:
        b, c, d = across, b, c
    if not a < b < c < d:
        return np.int64(-1)
    face[s, 0] = a << 32 | b
    face[s, 1] = c << 32 | d << 2 | turn
    return a


@jit
def _add(ring: Int64Array, n: int, point: int) -> int:
    """Append a corner that is not there yet; return the new length."""
    for i in range(n):
        if ring[i] == point:
            return n
    ring[n] = point
    return n + 1


@jit
def _write_face(ring: Int64Array, n: int, row_of_large: int, s: int, face: Int64Array) -> Any:
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
