"""Measure and centroid of every cell.

A face with more than three corners is the fan of triangles about the mean of its corners; a cell
is the body those triangles enclose, and its measure and centroid are exact for that body
(divergence theorem, tetrahedra or triangles about the mean of the cell's corners). Neighbours
see the same face, so measures add up to that of the domain. Cost: O(corners) a cell.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from sfcpart.dtypes import Array, FloatArray
from sfcpart.kernels._jit import jit

__all__ = ["PLANE", "SOLID", "SURFACE", "CellArrays", "cell_geometry"]

PLANE, SURFACE, SOLID = 0, 1, 2
_OUTSIDE = 1e-9


class CellArrays(NamedTuple):
    """Cells as kernels see them: CSR of points, kind tables and the faces of polyhedra."""

    kind: Array
    indptr: Array
    indices: Array
    n_corners: Array
    face_count: Array
    face_size: Array
    face_corner: Array
    poly_cell_indptr: Array
    poly_cell_indices: Array
    poly_face_indptr: Array
    poly_face_indices: Array


@jit
def cell_geometry(
    start: int,
    stop: int,
    mode: int,
    points: FloatArray,
    cells: CellArrays,
    most: int,
    center: FloatArray,
    measure: FloatArray,
) -> None:
    """Write `center` and the signed `measure` of cells start..stop.

    `mode` tells cells of the plane, of a surface in space and solids apart; `most` bounds the
    corners of a cell and the faces of a polyhedron.
    """
    q = np.empty((most, 3))
    out = np.empty(4)
    sign = np.empty(most, np.int8)
    queue = np.empty(most, np.int64)
    for c in range(start, stop):
        k = cells.kind[c]
        row = cells.indptr[c]
        n = int(cells.n_corners[k])
        if n == 0:
            n = cells.indptr[c + 1] - row
        _load(points, cells, k, row, n, mode, q, out)
        x, y, z = out[0], out[1], out[2]
        if mode == SOLID:
            if k == 42:
                _orient(c, points, x, y, z, cells, sign, queue)
                _polyhedron(c, points, x, y, z, cells, sign, out)
            elif n == 4:
                out[:3] = 0.0
                out[3] = _det(q, 0, 1, 2, 3) / 6.0
            else:
                _solid(k, cells, q, out)
        elif mode == PLANE:
            _planar(q, n, out)
        else:
            _surface(q, n, out)
        _keep_inside(q, n, out)
        center[c, 0] = x + out[0]
        center[c, 1] = y + out[1]
        if mode != PLANE:
            center[c, 2] = z + out[2]
        measure[c] = out[3]


@jit
def _load(
    points: FloatArray,
    cells: CellArrays,
    k: int,
    row: int,
    n: int,
    mode: int,
    q: FloatArray,
    out: FloatArray,
) -> None:
    """Put the corners, relative to their mean, into `q` and the mean into `out`."""
    ring = mode != SOLID and cells.face_count[k] > 0
    p0 = cells.indices[row]
    third = points.shape[1] == 3
    x = y = z = 0.0
    for i in range(n):
        p = cells.indices[row + cells.face_corner[k, i, 0]] if ring else cells.indices[row + i]
        q[i, 0] = points[p, 0] - points[p0, 0]
        q[i, 1] = points[p, 1] - points[p0, 1]
        q[i, 2] = points[p, 2] - points[p0, 2] if third else 0.0
        x += q[i, 0]
        y += q[i, 1]
        z += q[i, 2]
    x /= n
    y /= n
    z /= n
    for i in range(n):
        q[i, 0] -= x
        q[i, 1] -= y
        q[i, 2] -= z
    out[0] = points[p0, 0] + x
    out[1] = points[p0, 1] + y
    out[2] = points[p0, 2] + z if third else 0.0


@jit
def _det(q: FloatArray, o: int, a: int, b: int, c: int) -> float:
    """Six times the signed volume of the tetrahedron o, a, b, c."""
    ax, ay, az = q[a, 0] - q[o, 0], q[a, 1] - q[o, 1], q[a, 2] - q[o, 2]
    bx, by, bz = q[b, 0] - q[o, 0], q[b, 1] - q[o, 1], q[b, 2] - q[o, 2]
    cx, cy, cz = q[c, 0] - q[o, 0], q[c, 1] - q[o, 1], q[c, 2] - q[o, 2]
    det: float = ax * (by * cz - bz * cy) + ay * (bz * cx - bx * cz) + az * (bx * cy - by * cx)
    return det


@jit
def _planar(q: FloatArray, n: int, out: FloatArray) -> None:
    """Signed area and centroid of a polygon in the plane, about the mean of its corners."""
    area = sx = sy = 0.0
    for i in range(n):
        j = i + 1 if i + 1 < n else 0
        cross = q[i, 0] * q[j, 1] - q[i, 1] * q[j, 0]
        area += cross
        sx += cross * (q[i, 0] + q[j, 0])
        sy += cross * (q[i, 1] + q[j, 1])
    out[0] = sx / (3.0 * area) if area != 0.0 else 0.0
    out[1] = sy / (3.0 * area) if area != 0.0 else 0.0
    out[2] = 0.0
    out[3] = 0.5 * area


@jit
def _surface(q: FloatArray, n: int, out: FloatArray) -> None:
    """Area and centroid of a polygon in space: its fan of triangles, turned ones counted off."""
    nx = ny = nz = 0.0
    for i in range(n):
        j = i + 1 if i + 1 < n else 0
        nx += q[i, 1] * q[j, 2] - q[i, 2] * q[j, 1]
        ny += q[i, 2] * q[j, 0] - q[i, 0] * q[j, 2]
        nz += q[i, 0] * q[j, 1] - q[i, 1] * q[j, 0]
    area = sx = sy = sz = 0.0
    for i in range(n):
        j = i + 1 if i + 1 < n else 0
        cx = q[i, 1] * q[j, 2] - q[i, 2] * q[j, 1]
        cy = q[i, 2] * q[j, 0] - q[i, 0] * q[j, 2]
        cz = q[i, 0] * q[j, 1] - q[i, 1] * q[j, 0]
        w = np.sqrt(cx * cx + cy * cy + cz * cz)
        if cx * nx + cy * ny + cz * nz < 0.0:
            w = -w
        area += w
        sx += w * (q[i, 0] + q[j, 0])
        sy += w * (q[i, 1] + q[j, 1])
        sz += w * (q[i, 2] + q[j, 2])
    out[0] = sx / (3.0 * area) if area > 0.0 else 0.0
    out[1] = sy / (3.0 * area) if area > 0.0 else 0.0
    out[2] = sz / (3.0 * area) if area > 0.0 else 0.0
    out[3] = 0.5 * area


@jit
def _solid(k: int, cells: CellArrays, q: FloatArray, out: FloatArray) -> None:
    """Signed volume and centroid of a cell of a tabled kind."""
    volume = sx = sy = sz = 0.0
    for f in range(cells.face_count[k]):
        size = cells.face_size[k, f]
        mx = my = mz = 0.0
        for i in range(size):
            a = cells.face_corner[k, f, i]
            mx += q[a, 0]
            my += q[a, 1]
            mz += q[a, 2]
        mx /= size
        my /= size
        mz /= size
        a = np.int64(cells.face_corner[k, f, size - 1])
        for i in range(size):
            b = np.int64(cells.face_corner[k, f, i])
            v = (
                mx * (q[a, 1] * q[b, 2] - q[a, 2] * q[b, 1])
                + my * (q[a, 2] * q[b, 0] - q[a, 0] * q[b, 2])
                + mz * (q[a, 0] * q[b, 1] - q[a, 1] * q[b, 0])
            )
            volume += v
            sx += v * (mx + q[a, 0] + q[b, 0])
            sy += v * (my + q[a, 1] + q[b, 1])
            sz += v * (mz + q[a, 2] + q[b, 2])
            a = b
    _finish(volume, sx, sy, sz, out)


@jit
def _finish(volume: float, sx: float, sy: float, sz: float, out: FloatArray) -> None:
    """Turn sums of six volumes and moments into centroid and volume."""
    out[0] = 0.25 * sx / volume if volume != 0.0 else 0.0
    out[1] = 0.25 * sy / volume if volume != 0.0 else 0.0
    out[2] = 0.25 * sz / volume if volume != 0.0 else 0.0
    out[3] = volume / 6.0


@jit
def _polyhedron(
    c: int,
    points: FloatArray,
    x: float,
    y: float,
    z: float,
    cells: CellArrays,
    sign: Array,
    out: FloatArray,
) -> None:
    """Volume (never negative) and centroid of a polyhedron whose faces turn by `sign`."""
    volume = sx = sy = sz = 0.0
    first = cells.poly_cell_indptr[c]
    for f in range(cells.poly_cell_indptr[c + 1] - first):
        face = cells.poly_cell_indices[first + f]
        lo, hi = cells.poly_face_indptr[face], cells.poly_face_indptr[face + 1]
        mx = my = mz = 0.0
        for i in range(lo, hi):
            p = cells.poly_face_indices[i]
            mx += points[p, 0] - x
            my += points[p, 1] - y
            mz += points[p, 2] - z
        mx /= hi - lo
        my /= hi - lo
        mz /= hi - lo
        p = cells.poly_face_indices[hi - 1]
        ax, ay, az = points[p, 0] - x, points[p, 1] - y, points[p, 2] - z
        for i in range(lo, hi):
            p = cells.poly_face_indices[i]
            bx, by, bz = points[p, 0] - x, points[p, 1] - y, points[p, 2] - z
            v = sign[f] * (
                mx * (ay * bz - az * by) + my * (az * bx - ax * bz) + mz * (ax * by - ay * bx)
            )
            volume += v
            sx += v * (mx + ax + bx)
            sy += v * (my + ay + by)
            sz += v * (mz + az + bz)
            ax, ay, az = bx, by, bz
    _finish(volume, sx, sy, sz, out)


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
    """Find the sign that makes each face of a polyhedron point outward.

    Faces that share an edge must run along it in opposite ways; faces joined so are turned
    together until they enclose a volume that is not negative. Files store faces either way.
    """
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
            volume += sign[f] * _outward(cells.poly_cell_indices[first + f], points, x, y, z, cells)
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


@jit
def _outward(
    face: int, points: FloatArray, x: float, y: float, z: float, cells: CellArrays
) -> float:
    """Six times the volume between a face and the point (x, y, z)."""
    lo, hi = cells.poly_face_indptr[face], cells.poly_face_indptr[face + 1]
    mx = my = mz = nx = ny = nz = 0.0
    p = cells.poly_face_indices[hi - 1]
    ax, ay, az = points[p, 0] - x, points[p, 1] - y, points[p, 2] - z
    for i in range(lo, hi):
        p = cells.poly_face_indices[i]
        bx, by, bz = points[p, 0] - x, points[p, 1] - y, points[p, 2] - z
        mx += bx
        my += by
        mz += bz
        nx += ay * bz - az * by
        ny += az * bx - ax * bz
        nz += ax * by - ay * bx
        ax, ay, az = bx, by, bz
    volume: float = (mx * nx + my * ny + mz * nz) / (hi - lo)
    return volume


@jit
def _keep_inside(q: FloatArray, n: int, out: FloatArray) -> None:
    """Fall back to the mean of the corners where a centroid leaves their box (tangled cells)."""
    reach = 0.0
    for axis in range(3):
        lo = hi = q[0, axis]
        for i in range(1, n):
            lo = min(lo, q[i, axis])
            hi = max(hi, q[i, axis])
        reach = max(reach, hi - lo)
    slack = _OUTSIDE * reach
    for axis in range(3):
        lo = hi = q[0, axis]
        for i in range(1, n):
            lo = min(lo, q[i, axis])
            hi = max(hi, q[i, axis])
        if not (lo - slack <= out[axis] <= hi + slack):
            out[:3] = 0.0
            return
