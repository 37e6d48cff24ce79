"""Measure and centroid of cells of the plane, of surfaces and of tabled solids.

A face with more than three corners is the fan of triangles about the mean of its corners; a cell
is the body those triangles enclose, and its measure and centroid are exact for that body
(divergence theorem, tetrahedra or triangles about the mean of the cell's corners). Neighbours
see the same face, so measures add up to that of the domain. Cost: O(corners) a cell.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from sfcpart.dtypes import Array, FloatArray
from sfcpart.kernels._jit import jit

__all__ = ["CellArrays", "keep_inside", "ring_geometry", "solid_geometry"]

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
def solid_geometry(
    start: int,
    stop: int,
    points: FloatArray,
    cells: CellArrays,
    most: int,
    center: FloatArray,
    measure: FloatArray,
) -> None:
    """Write centroid and signed volume of cells start..stop; polyhedra are left out.

    No cell has more than `most` corners.
    """
    q = np.empty((most, 3))
    for c in range(start, stop):
        k = cells.kind[c]
        n: Any = np.int64(cells.n_corners[k])
        if n == 0:
            continue
        row = cells.indptr[c]
        x = y = z = 0.0
        o = cells.indices[row]
        for i in range(n):
            p = cells.indices[row + i]
            q[i, 0] = points[p, 0] - points[o, 0]
            q[i, 1] = points[p, 1] - points[o, 1]
            q[i, 2] = points[p, 2] - points[o, 2]
            x += q[i, 0]
            y += q[i, 1]
            z += q[i, 2]
        x, y, z = x / n, y / n, z / n
        center[c, 0] = points[o, 0] + x
        center[c, 1] = points[o, 1] + y
        center[c, 2] = points[o, 2] + z
        if n == 4:
            measure[c] = (
                q[1, 0] * (q[2, 1] * q[3, 2] - q[2, 2] * q[3, 1])
                + q[1, 1] * (q[2, 2] * q[3, 0] - q[2, 0] * q[3, 2])
                + q[1, 2] * (q[2, 0] * q[3, 1] - q[2, 1] * q[3, 0])
            ) / 6.0
            continue
        for i in range(n):
            q[i, 0] -= x
            q[i, 1] -= y
            q[i, 2] -= z
        six, sx, sy, sz = _enclose(q, cells.face_count[k], cells.face_size[k], cells.face_corner[k])
        measure[c] = six / 6.0
        if six != 0.0:
            keep_inside(q, n, 0.25 * sx / six, 0.25 * sy / six, 0.25 * sz / six, center[c])


@jit
def _enclose(
    q: FloatArray, n_faces: int, face_size: Array, face_corner: Array
) -> tuple[float, float, float, float]:
    """Sum six volumes, and their moments, of the tetrahedra between faces and the origin."""
    volume = sx = sy = sz = 0.0
    for f in range(n_faces):
        size = np.int64(face_size[f])
        mx = my = mz = 0.0
        for i in range(size):
            a = np.int64(face_corner[f, i])
            mx += q[a, 0]
            my += q[a, 1]
            mz += q[a, 2]
        mx, my, mz = mx / size, my / size, mz / size
        a = np.int64(face_corner[f, size - 1])
        for i in range(size):
            b = np.int64(face_corner[f, i])
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
    return volume, sx, sy, sz


@jit
def keep_inside(q: FloatArray, n: int, dx: float, dy: float, dz: float, center: FloatArray) -> None:
    """Add an offset to a centre unless it leaves the corners' box, as in tangled cells."""
    reach = off = 0.0
    for axis in range(3):
        d = dx if axis == 0 else dy if axis == 1 else dz
        lo = hi = q[0, axis]
        for i in range(1, n):
            lo = min(lo, q[i, axis])
            hi = max(hi, q[i, axis])
        reach = max(reach, hi - lo)
        off = max(off, d - hi, lo - d)
    if off <= 1e-9 * reach:
        center[0] += dx
        center[1] += dy
        if len(center) == 3:
            center[2] += dz


@jit
def ring_geometry(
    start: int,
    stop: int,
    points: FloatArray,
    cells: CellArrays,
    most: int,
    center: FloatArray,
    measure: FloatArray,
) -> None:
    """Write centroid and area of plane and surface cells start..stop.

    Centres with two columns mean cells in the plane: their areas are signed.
    """
    q = np.zeros((most + 1, 3))
    dim = points.shape[1]
    flat = center.shape[1] == 2
    for c in range(start, stop):
        k = cells.kind[c]
        row = cells.indptr[c]
        n: Any = np.int64(cells.n_corners[k])
        if n == 0:
            n = cells.indptr[c + 1] - row
        tabled = cells.face_count[k] > 0
        for axis in range(dim):
            o = points[cells.indices[row], axis]
            total = 0.0
            for i in range(n):
                at = np.int64(cells.face_corner[k, i, 0]) if tabled else i
                q[i, axis] = points[cells.indices[row + at], axis] - o
                total += q[i, axis]
            total /= n
            for i in range(n):
                q[i, axis] -= total
            q[n, axis] = q[0, axis]
            if axis < center.shape[1]:
                center[c, axis] = o + total
        area, sx, sy, sz = _span(q, n)
        measure[c] = 0.5 * area if flat else 0.5 * abs(area)
        if area != 0.0:
            keep_inside(q, n, sx / (3.0 * area), sy / (3.0 * area), sz / (3.0 * area), center[c])


@jit
def _span(q: FloatArray, n: int) -> tuple[float, float, float, float]:
    """Sum twice the areas, and their moments, of the triangles between edges and the origin.

    Triangles that turn against the whole count off, in space as in the plane. The sum has the
    sign of the third component of the vector area.
    """
    nx = ny = nz = 0.0
    for i in range(n):
        nx += q[i, 1] * q[i + 1, 2] - q[i, 2] * q[i + 1, 1]
        ny += q[i, 2] * q[i + 1, 0] - q[i, 0] * q[i + 1, 2]
        nz += q[i, 0] * q[i + 1, 1] - q[i, 1] * q[i + 1, 0]
    area = sx = sy = sz = 0.0
    for i in range(n):
        cx = q[i, 1] * q[i + 1, 2] - q[i, 2] * q[i + 1, 1]
        cy = q[i, 2] * q[i + 1, 0] - q[i, 0] * q[i + 1, 2]
        cz = q[i, 0] * q[i + 1, 1] - q[i, 1] * q[i + 1, 0]
        w = np.sqrt(cx * cx + cy * cy + cz * cz)
        if (cx * nx + cy * ny + cz * nz < 0.0) != (nz < 0.0):
            w = -w
        area += w
        sx += w * (q[i, 0] + q[i + 1, 0])
        sy += w * (q[i, 1] + q[i + 1, 1])
        sz += w * (q[i, 2] + q[i + 1, 2])
    return area, sx, sy, sz
