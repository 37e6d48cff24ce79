"""A box refined towards the middle of its floor, with hanging nodes, given by its faces.

Level 0 is a box of n^3 unit cubes. Each next level halves the cells of the middle half of the
level before, at the floor. A fine face on a coarse cell is a face like any other, so a list of
faces (two cells each) holds such meshes exactly where cells with points could not. Every cell of
a level has at most one level difference to its neighbours.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, IntArray, index_dtype
from sfcpart.errors import InputError
from sfcpart.mesh.mesh import Mesh

__all__ = ["FaceShape", "refined_box"]


@dataclass(frozen=True, eq=False)
class FaceShape:
    """A mesh made by rule, as a finite-volume code holds it.

    Attributes
    ----------
    face_cell : (n_faces, 2) int32 or int64
        Cells of each face; -1 as the second one on the boundary.
    face_measure : (n_faces,) float64
    cell_center : (n_cells, 3) float64
    cell_measure : (n_cells,) float64
    cell_level : (n_cells,) int32
    """

    face_cell: IntArray
    face_measure: FloatArray
    cell_center: FloatArray
    cell_measure: FloatArray
    cell_level: Int32Array

    @property
    def n_cells(self) -> int:
        """Number of cells."""
        return len(self.cell_measure)

    def to_mesh(self) -> Mesh:
        """Return the shape as a checked `Mesh` with the field "level"."""
        return Mesh.from_faces(
            self.face_cell,
            self.face_measure,
            self.cell_center,
            self.cell_measure,
            cell_fields={"level": self.cell_level},
        )

    def with_shuffled_cells(self, seed: int) -> FaceShape:
        """Return the shape with its cells in random order: the worst input order."""
        order = np.random.default_rng(seed).permutation(self.n_cells)
        new = np.empty(self.n_cells + 1, self.face_cell.dtype)
        new[order] = np.arange(self.n_cells)
        new[-1] = -1
        return replace(
            self,
            face_cell=new[self.face_cell],
            cell_center=self.cell_center[order],
            cell_measure=self.cell_measure[order],
            cell_level=self.cell_level[order],
        )


def refined_box(n: int, *, n_levels: int = 2) -> FaceShape:
    """Return a box of n^3 unit cubes, refined `n_levels` times towards the middle of its floor.

    It has n^3 + 7/8 n^3 n_levels cells and volume n^3.

    Parameters
    ----------
    n : int
        Cubes along each axis, a multiple of 4.
    n_levels : int
        How often the middle is halved, >= 0.

    Raises
    ------
    InputError
        If n is no multiple of 4 or n_levels is negative.

    Notes
    -----
    O(n_cells) time and memory; 10^7 cells (n = 154 is no multiple of 4; 152 gives 9.7 million)
    take a few seconds.

    Examples
    --------
    >>> box = refined_box(4, n_levels=1)
    >>> box.n_cells, float(box.cell_measure.sum())
    (120, 64.0)
    """
    if n < 4 or n % 4 or n_levels < 0:
        raise InputError(f"n is {n}, n_levels {n_levels}; wanted a multiple of 4 and at least 0")
    dtype = index_dtype(n**3 * (n_levels + 1))
    tables: list[IntArray] = []
    origins, first = [np.zeros(3)], 0
    for level in range(n_levels + 1):
        table, first = _level_table(n, first, last=level == n_levels, dtype=dtype)
        tables.append(table)
        middle = np.array([n / 4, n / 4, 0.0]) / 2**level
        origins.append(origins[-1] + middle)
    face_cell, face_level = _all_faces(tables)
    levels = np.arange(n_levels + 1)
    sizes = [int((table >= 0).sum()) for table in tables]
    return FaceShape(
        face_cell=face_cell,
        face_measure=0.25 ** face_level.astype(float),
        cell_center=_centers(tables, origins),
        cell_measure=np.repeat(0.125 ** levels.astype(float), sizes),
        cell_level=np.repeat(levels, sizes).astype(np.int32),
    )


def _level_table(n: int, first: int, *, last: bool, dtype: type[Any]) -> tuple[IntArray, int]:
    """Give the cells of one level numbers from `first` on; -1 where the next level takes over."""
    kept = np.ones((n, n, n), bool)
    if not last:
        kept[: n // 2, n // 4 : 3 * n // 4, n // 4 : 3 * n // 4] = False
    count = int(kept.sum())
    table: IntArray = np.full((n, n, n), -1, dtype)
    table[kept] = np.arange(first, first + count, dtype=dtype)
    return table, first + count


def _all_faces(tables: list[IntArray]) -> tuple[IntArray, Array]:
    """Return the cells and the level of all faces, level by level."""
    pairs: list[IntArray] = []
    for level, table in enumerate(tables):
        outer = tables[level - 1] if level else np.full((8, 8, 8), -1, table.dtype)
        pairs.append(np.concatenate([*_inner_pairs(table), *_outer_pairs(table, outer, level)]))
    numbers = np.repeat(np.arange(len(tables)), [len(pair) for pair in pairs])
    return np.concatenate(pairs), numbers


def _inner_pairs(table: IntArray) -> list[IntArray]:
    """Pair the neighbours within a level, axis by axis."""
    pairs = []
    for axis in range(3):
        lower = np.moveaxis(table, axis, 0)[:-1].ravel()
        upper = np.moveaxis(table, axis, 0)[1:].ravel()
        both = np.stack([lower, upper], axis=1)
        pairs.append(both[(lower >= 0) & (upper >= 0)])
    return pairs


def _outer_pairs(table: IntArray, coarse: IntArray, level: int) -> list[IntArray]:
    """Pair the outermost cells of a level with the coarser cells outside, or with -1."""
    n, m = len(table), len(coarse)
    inside = (slice(0, m // 2), slice(m // 4, 3 * m // 4), slice(m // 4, 3 * m // 4))
    pairs = []
    for axis in range(3):
        for end, outside in ((0, inside[axis].start - 1), (n - 1, inside[axis].stop)):
            own = np.take(table, end, axis=axis)
            other = np.full_like(own, -1)
            if level and outside >= 0:
                window: Any = (*inside[:axis], outside, *inside[axis + 1 :])
                face = coarse[window]
                other = face.repeat(2, axis=0).repeat(2, axis=1)
            both = np.stack([own.ravel(), other.ravel()], axis=1)
            pairs.append(both[own.ravel() >= 0])
    return pairs


def _centers(tables: list[IntArray], origins: list[FloatArray]) -> FloatArray:
    """Return the centres of all cells, level by level, (n_cells, 3)."""
    pieces = []
    for level, table in enumerate(tables):
        zyx = np.nonzero(table >= 0)
        center = np.empty((len(zyx[0]), 3))
        for axis in range(3):
            center[:, axis] = origins[level][axis] + (zyx[2 - axis] + 0.5) / 2**level
        pieces.append(center)
    return np.concatenate(pieces)
