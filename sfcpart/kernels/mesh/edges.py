"""Shortest and longest edge of every cell; edges are those of its faces. O(edges) a cell."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import FloatArray
from sfcpart.kernels._jit import jit
from sfcpart.kernels.mesh.cells import CellArrays

__all__ = ["edge_lengths"]


@jit
def edge_lengths(
    start: int,
    stop: int,
    points: FloatArray,
    cells: CellArrays,
    shortest: FloatArray,
    longest: FloatArray,
) -> None:
    """Write the lengths of the shortest and longest edges of cells start..stop."""
    for c in range(start, stop):
        k = cells.kind[c]
        row = cells.indptr[c]
        lo, hi = np.inf, 0.0
        if k == 42:
            for at in range(cells.poly_cell_indptr[c], cells.poly_cell_indptr[c + 1]):
                face = cells.poly_cell_indices[at]
                first, last = cells.poly_face_indptr[face], cells.poly_face_indptr[face + 1]
                p = cells.poly_face_indices[last - 1]
                for i in range(first, last):
                    q = cells.poly_face_indices[i]
                    d = _squared(points, p, q)
                    lo, hi = min(lo, d), max(hi, d)
                    p = q
        elif cells.face_count[k] == 0:
            last = cells.indptr[c + 1]
            p = cells.indices[last - 1]
            for i in range(row, last):
                q = cells.indices[i]
                d = _squared(points, p, q)
                lo, hi = min(lo, d), max(hi, d)
                p = q
        else:
            for f in range(cells.face_count[k]):
                size = np.int64(cells.face_size[k, f])
                p = cells.indices[row + cells.face_corner[k, f, size - 1]]
                for i in range(size):
                    q = cells.indices[row + cells.face_corner[k, f, i]]
                    d = _squared(points, p, q)
                    lo, hi = min(lo, d), max(hi, d)
                    p = q
        shortest[c] = np.sqrt(lo)
        longest[c] = np.sqrt(hi)


@jit
def _squared(points: FloatArray, p: int, q: int) -> float:
    """Squared distance of two points."""
    total = 0.0
    for axis in range(points.shape[1]):
        d = points[p, axis] - points[q, axis]
        total += d * d
    return total
