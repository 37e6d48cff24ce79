"""Octree-like meshes over a box of unit cubes, with hanging nodes, given by their faces.

Leaves are kept in Morton order of their lowest corners on the finest grid; a leaf's neighbour is
found by the Morton code of a point just outside (binary search). O(n log n).
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from sfcpart.mesh.mesh import Mesh


def morton(corner: np.ndarray) -> np.ndarray:
    """Interleave the bits (at most 20 each) of (n, 3) non-negative integers."""
    code = np.zeros(len(corner), np.int64)
    for axis in range(3):
        x = corner[:, axis].astype(np.int64)
        for shift, mask in (
            (32, 0x1F00000000FFFF),
            (16, 0x1F0000FF0000FF),
            (8, 0x100F00F00F00F00F),
            (4, 0x10C30C30C30C30C3),
            (2, 0x1249249249249249),
        ):
            x = (x | x << shift) & mask
        code |= x << axis
    return code


@dataclass(frozen=True, eq=False)
class Octree:
    """Leaves in Morton order.

    corner (n, 3) and size (n,) count finest cells; code (n,) is that of the corner.
    """

    shape: tuple[int, int, int]
    n_levels: int
    corner: np.ndarray
    size: np.ndarray
    code: np.ndarray

    @classmethod
    def grow(
        cls,
        shape: tuple[int, int, int],
        n_levels: int,
        divides: Callable[[np.ndarray, int], np.ndarray],
    ) -> Octree:
        """Divide cells level by level where `divides(center, level)` says so (units: cubes)."""
        fine = 1 << n_levels
        cells = np.indices(shape, np.int32).reshape(3, -1).T * fine
        corners, sizes = [], []
        for level in range(n_levels + 1):
            size = fine >> level
            split = np.zeros(len(cells), bool)
            if level < n_levels:
                split = divides((cells + size / 2) / fine, level)
            corners.append(cells[~split])
            sizes.append(np.full(len(corners[-1]), size, np.int32))
            shifts = np.indices((2, 2, 2), np.int32).reshape(3, -1).T * (size // 2)
            cells = (cells[split][:, None] + shifts).reshape(-1, 3)
        corner, size = np.concatenate(corners), np.concatenate(sizes)
        code = morton(corner)
        order = np.argsort(code, kind="stable")
        return cls(shape, n_levels, corner[order], size[order], code[order])

    @property
    def level(self) -> np.ndarray:
        """How often the cube of each leaf was halved."""
        return (self.n_levels - np.log2(self.size).astype(np.int32)).astype(np.int32)

    def leaf_at(self, point: np.ndarray) -> np.ndarray:
        """Return the leaf that holds each finest cell (n, 3)."""
        return np.searchsorted(self.code, morton(point), side="right") - 1

    def parents(self, before: Octree) -> np.ndarray:
        """Return for each leaf the leaf of another tree at its lowest corner."""
        return before.leaf_at(self.corner).astype(np.int32)

    def to_mesh(self) -> Mesh:
        """Return the mesh, its faces and the field "level"."""
        fine = 1 << self.n_levels
        pairs, areas = zip(*self._faces(), strict=True)
        size = self.size / fine
        return Mesh.from_faces(
            np.concatenate(pairs),
            np.concatenate(areas) / fine**2,
            (self.corner + self.size[:, None] / 2) / fine,
            size**3,
            cell_fields={"level": self.level},
        )

    def _faces(self):
        """Yield the cells and areas of the faces towards each side, from the finer cell's side."""
        end = np.array(self.shape) << self.n_levels
        own = np.arange(len(self.size), dtype=np.int32)
        for axis in range(3):
            for up in (False, True):
                point = self.corner.copy()
                point[:, axis] += self.size if up else -1
                inside = (point[:, axis] >= 0) & (point[:, axis] < end[axis])
                rim = own[~inside]
                yield np.stack([rim, np.full_like(rim, -1)], axis=1), self._area(rim)
                cell = own[inside]
                other = self.leaf_at(point[inside]).astype(np.int32)
                larger = self.size[other] - self.size[cell]
                kept = (larger > 0) | ((larger == 0) & up)
                yield np.stack([cell[kept], other[kept]], axis=1), self._area(cell[kept])

    def _area(self, cell: np.ndarray) -> np.ndarray:
        return self.size[cell].astype(float) ** 2
