"""Make the cells of a structured grid: hexahedra, or quadrilaterals if one axis is flat.

Cells run with the first axis fastest, as VTK numbers them. Cost: O(cells), in memory that is
asked for before it is taken.
"""

from __future__ import annotations

import os
from collections.abc import Sequence

import numpy as np

from sfcpart.dtypes import KIND, OFFSET, Array, FloatArray, IntArray, index_dtype
from sfcpart.errors import FileError, InsufficientMemoryError
from sfcpart.files.meshes.raw import RawMesh

__all__ = ["lattice_points", "lattice_raw"]

_BYTES_A_CELL = 100  # points 24, ids 32, offsets 8, kind 1, and room to work in
_SQUARE = ((0, 0), (1, 0), (1, 1), (0, 1))
_CORNERS: dict[int, tuple[tuple[int, ...], ...]] = {
    2: _SQUARE,
    3: tuple((*corner, up) for up in (0, 1) for corner in _SQUARE),
}


def lattice_points(axes: Sequence[FloatArray]) -> FloatArray:
    """Return all points of a grid along the axes, (n, 3), the first axis fastest.

    Parameters
    ----------
    axes : three arrays of coordinates

    Raises
    ------
    InsufficientMemoryError
        If the grid would not fit the memory there is.
    """
    _check_memory([len(axis) for axis in axes])
    z, y, x = np.meshgrid(axes[2], axes[1], axes[0], indexing="ij")
    return np.column_stack([x.reshape(-1), y.reshape(-1), z.reshape(-1)])


def lattice_raw(
    points: Array,
    shape: Sequence[int],
    cell_fields: dict[str, Array],
    point_fields: dict[str, Array],
) -> RawMesh:
    """Join lattice points to cells.

    Parameters
    ----------
    points : (nx * ny * nz, 3) real numbers
    shape : (nx, ny, nz)
        Points along each axis.
    cell_fields, point_fields : dict of str to array

    Raises
    ------
    FileError
        If the number of points is another, or fewer than two axes have an extent.
    """
    _check_memory(shape)
    if len(points) != int(np.prod(shape, dtype=object)):
        raise FileError(f"has {len(points)} points; a grid of {tuple(shape)} wants another number")
    stride = (1, shape[0], shape[0] * shape[1])
    wide = [axis for axis in range(3) if shape[axis] > 1]
    if len(wide) < 2:
        raise FileError(f"is a grid of {tuple(shape)} points; wanted cells of dimension 2 or 3")
    dtype = index_dtype(len(points))
    first: Array = np.zeros(1, dtype)
    for axis in wide:
        steps = stride[axis] * np.arange(shape[axis] - 1)
        first = (steps.astype(dtype)[:, None] + first).reshape(-1)  # later axes are slower
    return RawMesh(
        points=points,
        kind=np.full(len(first), 12 if len(wide) == 3 else 9, KIND),
        indptr=np.arange(len(first) + 1, dtype=OFFSET) * 2 ** len(wide),
        indices=_corner_ids(first, [stride[axis] for axis in wide]),
        cell_fields=cell_fields,
        point_fields=point_fields,
    )


def _corner_ids(first: Array, stride: Sequence[int]) -> IntArray:
    """Return the corners of every cell from its first one, flat."""
    ids = np.empty((len(first), 2 ** len(stride)), first.dtype)
    for place, corner in enumerate(_CORNERS[len(stride)]):
        step = sum(c * s for c, s in zip(corner, stride, strict=True))
        np.add(first, step, out=ids[:, place], casting="unsafe")
    return ids.reshape(-1)


def _check_memory(shape: Sequence[int]) -> None:
    """Refuse a grid that cannot fit; a few words in a damaged file can claim any size."""
    wanted = int(np.prod(shape, dtype=object)) * _BYTES_A_CELL
    free = os.sysconf("SC_AVPHYS_PAGES") * os.sysconf("SC_PAGE_SIZE")
    if wanted > free:
        raise InsufficientMemoryError(
            f"a grid of {tuple(shape)} points wants about {wanted >> 20} MB; "
            f"{free >> 20} MB are free"
        )
