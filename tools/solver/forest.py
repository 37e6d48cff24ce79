"""A forest of quadtrees or octrees over a lattice of unit cells, spread over ranks.

A leaf of level k is a cube of edge 2^-k. Its anchor is its lowest corner in units of the finest
cells, its global number the Morton number of the anchor: unique among leaves, ascending along the
curve, and known without asking anybody (G. M. Morton, IBM report (1966), from memory). The channel
is periodic along its first axis.

Cells are a dict of arrays that `sfcpart.parallel.migrate` takes as it is: `gid`, `level`, fields,
and `near`, the numbers of the cells across each face, ascending, as CSR. A hanging face is a face
of the smaller cell; two leaves that share a face differ by one level at most.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np

from sfcpart.parallel import Ragged


@dataclass(frozen=True)
class Forest:
    """The lattice of the trees' roots, and how deep the trees may be."""

    shape: tuple[int, ...]
    deepest: int

    @property
    def dim(self) -> int:
        """Number of axes."""
        return len(self.shape)

    @property
    def n_children(self) -> int:
        """Children of a cell."""
        return 1 << self.dim

    @property
    def extent(self) -> np.ndarray:
        """Finest cells along each axis."""
        return np.array(self.shape) << self.deepest

    def number(self, anchor: np.ndarray) -> np.ndarray:
        """Return Morton numbers: the bits of the axes in turn, the first axis lowest."""
        gid = np.zeros(anchor.shape[:-1], np.int64)
        for bit in range(int(self.extent.max()).bit_length()):
            for axis in range(self.dim):
                gid |= ((anchor[..., axis] >> bit) & 1) << (self.dim * bit + axis)
        return gid

    def anchor(self, gid: np.ndarray) -> np.ndarray:
        """Return the anchors of Morton numbers."""
        anchor = np.zeros((*gid.shape, self.dim), np.int64)
        for bit in range(int(self.extent.max()).bit_length()):
            for axis in range(self.dim):
                anchor[..., axis] |= ((gid >> (self.dim * bit + axis)) & 1) << bit
        return anchor

    def size(self, level: np.ndarray) -> np.ndarray:
        """Return edges in units of the finest cells."""
        return np.left_shift(1, self.deepest - level.astype(np.int64))

    def volume(self, level: np.ndarray) -> np.ndarray:
        """Return volumes in units of the roots: powers of two, hence exact."""
        return np.exp2(-self.dim * level.astype(np.float64))

    def center(self, cells: dict) -> np.ndarray:
        """Return centres in units of the roots."""
        twice = 2 * self.anchor(cells["gid"]) + self.size(cells["level"])[:, None]
        return twice / (2 << self.deepest)

    def children(self, gid: np.ndarray, level: np.ndarray) -> np.ndarray:
        """Return the numbers of the children of each cell, (n, n_children)."""
        step = np.left_shift(1, self.dim * (self.deepest - 1 - level.astype(np.int64)))
        return gid[:, None] + step[:, None] * np.arange(self.n_children)

    def parent(self, gid: np.ndarray, level: np.ndarray) -> np.ndarray:
        """Return the numbers of the parents: those of their first children."""
        return gid & -np.left_shift(1, self.dim * (self.deepest + 1 - level.astype(np.int64)))

    def siblings(self, gid: np.ndarray, level: np.ndarray) -> np.ndarray:
        """Return the numbers of a cell's siblings and its own, (n, n_children)."""
        return self.children(self.parent(gid, level), level - 1)

    def roots(self, rank: int, size: int) -> dict:
        """Return the rank's share of the roots: each size-th one, whatever lies beside it."""
        place = np.stack(np.unravel_index(np.arange(np.prod(self.shape)), self.shape), axis=1)
        gid = self.number(place << self.deepest)
        order = np.argsort(gid)[rank::size]
        place, gid = place[order], gid[order]
        rows, near = [], []
        for axis, step in product(range(self.dim), (-1, 1)):
            beside = place.copy()
            beside[:, axis] += step
            beside[:, 0] %= self.shape[0]
            inside = (beside[:, axis] >= 0) & (beside[:, axis] < self.shape[axis])
            rows.append(np.flatnonzero(inside))
            near.append(self.number(beside[inside] << self.deepest))
        relation = relation_of(len(gid), np.concatenate(rows), np.concatenate(near))
        return {"gid": gid, "level": np.zeros(len(gid), np.int8), "near": relation}

    def contact(self, one: tuple, other: tuple) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Return where pairs of leaves meet: is it a face, its axis, and is `one` the lower.

        Each side is (gid, level).
        """
        low_1, low_2 = self.anchor(one[0]), self.anchor(other[0])
        high_1 = low_1 + self.size(one[1])[:, None]
        high_2 = low_2 + self.size(other[1])[:, None]
        overlaps = (low_1 < high_2) & (low_2 < high_1)
        around = np.zeros(self.dim, np.int64)
        around[0] = self.extent[0]
        below = (high_1 == low_2) | ((around > 0) & (high_1 - around == low_2))
        above = (high_2 == low_1) | ((around > 0) & (high_2 - around == low_1))
        touches = below | above
        is_face = (touches.sum(axis=1) == 1) & (touches | overlaps).all(axis=1)
        axis = np.argmax(touches, axis=1)
        return is_face, axis, below[np.arange(len(axis)), axis]


def relation_of(n_rows: int, row: np.ndarray, near: np.ndarray) -> Ragged:
    """Return pairs as CSR, each once, the neighbours of a row ascending."""
    order = np.lexsort((near, row))
    row, near = row[order], near[order]
    first = np.ones(len(row), bool)
    first[1:] = (row[1:] != row[:-1]) | (near[1:] != near[:-1])
    row, near = row[first], near[first]
    return Ragged(np.searchsorted(row, np.arange(n_rows + 1)), near)


def rows_of(relation: Ragged) -> np.ndarray:
    """Return the row of each entry."""
    return np.repeat(np.arange(len(relation.indptr) - 1), np.diff(relation.indptr))
