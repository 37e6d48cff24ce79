"""Measure and centroid of polyhedra, whose files may list faces either way round.

Faces that share an edge must run along it in opposite ways. Faces joined so are turned together,
then all at once outward, that is until they enclose a volume that is not negative. Cost: the square
of the edges of a cell, since no table of edges is kept.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int64Array
from sfcpart.kernels._jit import jit
from sfcpart.kernels.mesh.cells import CellArrays, keep_inside

__all__ = ["polyhedron_geometry"]


@jit
def polyhedron_geometry(
    start: int,
    stop: int,
    chosen: Int64Array,
    points: FloatArray,
    cells: CellArrays,
    most: int,
    center: FloatArray,
    measure: FloatArray,
) -> None:
    """Write centroid and volume (>= 0) of the cells chosen[start..stop].

    No cell has more than `most` points or faces.
    """
    q = np.empty((most, 3))
    sign = np.empty(most, np.int8)
    queue = np.empty(most, np.int64)
    for at in range(start, stop):
        c = chosen[at]
        row = cells.indptr[c]
        n = cells.indptr[c + 1] - row
        for axis in range(3):
            o = points[cells.indices[row], axis]
            total = 0.0
            for i in range(n):
                q[i, axis] = points[cells.indices[row + i], axis] - o
                total += q[i, axis]
            total /= n
            for i in range(n):
                q[i, axis] -= total
            center[c, axis] = o + total
        x, y, z = center[c, 0], center[c, 1], center[c, 2]
        _orient(c, points, x, y, z, cells, sign, queue)
        six = sx = sy = sz = 0.0
        first = cells.poly_cell_indptr[c]
        for f in range(cells.poly_cell_indptr[c + 1] - first):
            face = cells.poly_cell_indices[first + f]
            v, ux, uy, uz = _between(face, points, x, y, z, cells)
            six += sign[f] * v
            sx += sign[f] * ux
            sy += sign[f] * uy
            sz += sign[f] * uz
        measure[c] = six / 6.0
        if six != 0.0:
            keep_inside(q, n, 0.25 * sx / six, 0.25 * sy / six, 0.25 * sz / six, center[c])


@jit
def _between(
    face: int, points: FloatArray, x: float, y: float, z: float, cells: CellArrays
) -> tuple[float, float, float, float]:
    """Sum six volumes, and their moments, of the tetrahedra between a face and (x, y, z)."""
    lo, hi = cells.poly_face_indptr[face], cells.poly_face_indptr[face + 1]
    mx = my = mz = 0.0
    for i in range(lo, hi):
        p = cells.poly_face_indices[i]
        mx += points[p, 0] - x
        my += points[p, 1] - y
        mz += points[p, 2] - z
    n = hi - lo
    mx, my, mz = mx / n, my / n, mz / n
    volume = sx = sy = sz = 0.0
    p = cells.poly_face_indices[hi - 1]
    ax, ay, az = points[p, 0] - x, points[p, 1] - y, points[p, 2] - z
    for i in range(lo, hi):
        p = cells.poly_face_indices[i]
        bx, by, bz = points[p, 0] - x, points[p, 1] - y, points[p, 2] - z
        v = mx * (ay * bz - az * by) + my * (az * bx - ax * bz) + mz * (ax * by - ay * bx)
        volume += v
        sx += v * (mx + ax + bx)
        sy += v * (my + ay + by)
        sz += v * (mz + az + bz)
        ax, ay, az = bx, by, bz
    return volume, sx, sy, sz


@jit
def _orient(
    c: int,
    points: FloatArray,
    x: float,
    y: float,
    z: float,
    cells: CellArrays,
    sign: Array,
    queue: Array,
) -> None:
    """Find the sign that makes each face of a polyhedron point outward."""
    first = cells.poly_cell_indptr[c]
    n = cells.poly_cell_indptr[c + 1] - first
    sign[:n] = 0
    head = tail = 0
    for seed in range(n):
        if sign[seed] != 0:
            continue
        sign[seed] = 1
        queue[tail] = seed
        begin = head = tail
        tail += 1
        volume = 0.0
        while head < tail:
            f = queue[head]
            head += 1
            volume += (
                sign[f] * _between(cells.poly_cell_indices[first + f], points, x, y, z, cells)[0]
            )
            for g in range(n):
                if sign[g] == 0:
                    turn = _turn(
                        cells.poly_cell_indices[first + f],
                        cells.poly_cell_indices[first + g],
                        cells,
                    )
                    if turn != 0:
                        sign[g] = sign[f] * turn
                        queue[tail] = g
                        tail += 1
        if volume < 0.0:
            for i in range(begin, tail):
                sign[queue[i]] = -sign[queue[i]]


@jit
def _turn(f: int, g: int, cells: CellArrays) -> int:
    """Return 1 if faces f and g run along a common edge in opposite ways, -1 if alike, else 0."""
    flo, fhi = cells.poly_face_indptr[f], cells.poly_face_indptr[f + 1]
    glo, ghi = cells.poly_face_indptr[g], cells.poly_face_indptr[g + 1]
    a = cells.poly_face_indices[fhi - 1]
    for i in range(flo, fhi):
        b = cells.poly_face_indices[i]
        c = cells.poly_face_indices[ghi - 1]
        for j in range(glo, ghi):
            d = cells.poly_face_indices[j]
            if a == d and b == c and a != b:
                return 1
            if a == c and b == d and a != b:
                return -1
            c = d
        a = b
    return 0
