"""Triangles in, the nearest triangle of every pixel out: so meshes of any size are drawn whole.

Cost: the pixels of the boxes around all triangles, in one compiled loop (`kernels.raster`).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import FloatArray, Int32Array

__all__ = ["nearest_triangles"]


def nearest_triangles(corners: FloatArray, shape: tuple[int, int]) -> Int32Array:
    """Return which triangle is seen at each pixel.

    Parameters
    ----------
    corners : (n, 3, 3) float64
        Columns x and y in pixels (pixel i covers i..i+1), and depth: small is near.
    shape : (rows, columns)
        Size of the image; y counts from the first row.

    Returns
    -------
    (rows, columns) int32
        Number of the nearest triangle, -1 where there is none. Equal depths: the later one.
    """
    from sfcpart.kernels.raster import draw_rows
    from sfcpart.kernels.threads import run_ranges

    seen = np.full(shape, -1, np.int32)
    depth = np.full(shape, np.inf)
    run_ranges(draw_rows, shape[0], np.ascontiguousarray(corners), seen, depth, smallest=64)
    return seen
