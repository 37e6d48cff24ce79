"""What the parts of a graph should weigh, and the capacities that follow on coarser graphs."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array

__all__ = ["Aim"]

RELAX = 0.06
"""Excess that parts may have on coarse graphs, so that full parts can exchange vertices."""

LOOSER = 1.5
"""Excess on coarse graphs as a multiple of that allowed in the end: full parts hinder flows."""


@dataclass(frozen=True, eq=False)
class Aim:
    """What the parts should weigh.

    Attributes
    ----------
    share : (n_parts,) float64
        Wanted weight of each part.
    capacity : (n_parts,) int64
        The most it may weigh.
    seed : int
    """

    share: FloatArray
    capacity: Int64Array
    seed: int = 0

    @classmethod
    def of(cls, total: int, speed: FloatArray, tolerance: float, seed: int = 0) -> Aim:
        """Divide a total weight by speeds: at most (1 + tolerance) of the share, rounded up."""
        share = total * (speed / speed.sum())
        whole = np.ceil(share - 1e-12 * share).astype(np.int64)
        if np.all(speed == speed[0]):
            whole[:] = -(-total // len(speed))
        most = np.floor((1.0 + tolerance) * whole + 1e-9).astype(np.int64)
        capacity = np.maximum(most, whole)
        return cls(share, capacity, seed)

    @property
    def n_parts(self) -> int:
        """Number of parts."""
        return len(self.share)

    def relaxed(self, heaviest: int) -> Int64Array:
        """Return capacities for coarse vertices: what full parts need to exchange any."""
        extra = np.minimum(heaviest, RELAX * self.share)
        loose = np.maximum(self.share + extra, self.share + LOOSER * (self.capacity - self.share))
        return np.maximum(self.capacity, loose.astype(np.int64))

    def of_blocks(self, blocks: list[tuple[int, int]], heaviest: int) -> Int64Array:
        """Return the capacity of each block (at its first part), with room for coarse vertices.

        A block of m parts gets a share of the tolerance that leaves as much for each of the
        log2(m) splits to come.
        """
        capacity = np.zeros(self.n_parts, np.int64)
        for low, high in blocks:
            share = float(self.share[low:high].sum())
            most = float(self.capacity[low:high].sum())
            splits = int(np.ceil(np.log2(high - low)))
            excess = max(1.0, most / share) ** (1.0 / (1 + splits)) if share > 0 else 1.0
            tight = int(np.ceil(share * excess)) if high - low > 1 else int(most)
            capacity[low] = max(tight, int(share) + heaviest)
        return capacity
