"""What a new split moves: who sends how much to whom, how long that takes, and the least possible.

The least: part p may keep no more than it may hold, so all of its home weight beyond that must
leave it, whatever the split: moved >= sum over old parts of max(0, home weight - most). It holds
for every split that keeps the same bound on every part (elementary). The seconds are those of the
busiest part, one message to each other part (Hockney's T(m) = alpha + m / B, as for a step); what
is sent and what is received run at once.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from math import isfinite
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array
from sfcpart.errors import InputError
from sfcpart.measure.step_model import DEFAULT_NETWORK, NETWORKS, Network
from sfcpart.resplit.overlap import Overlap

if TYPE_CHECKING:
    from scipy.sparse import csr_array

    from sfcpart.comm.base import Comm

__all__ = ["CELL_BYTES", "Migration", "least_moved"]

CELL_BYTES = 200.0
"""Bytes a moving cell takes along by default: 25 float64 of geometry and fields (common practice,
no source)."""


def least_moved(home_weight: Int64Array, most: Int64Array) -> int:
    """Return a weight that every split must move in which no part holds more than it may.

    Parameters
    ----------
    home_weight : (n_old_parts,) int64
        Weight that each part holds now.
    most : (n_parts,) int64
        The most each part may hold; old parts beyond these are given up.

    Examples
    --------
    >>> least_moved(np.array([5, 1, 3]), np.array([4, 4]))
    4
    """
    may = np.zeros(len(home_weight), np.int64)
    may[: len(most)] = most[: len(home_weight)]
    return int(np.maximum(home_weight - may, 0).sum())


@dataclass(frozen=True, eq=False)
class Migration:
    """What moves from old parts to new ones.

    Attributes
    ----------
    overlap : Overlap
        Cells and quantised weight of every pair of an old and a new part, what stays included.
    cell_bytes : float
        Bytes that a moving cell takes along.
    unit : float
        Weight that the integer 1 of the overlap stands for.
    least : int
        Quantised weight that every split as balanced as this one must move.
    network : Network
        Behind the seconds.

    Examples
    --------
    >>> moved = Migration.of(
    ...     np.array([0, 0, 0, 1], np.int32), np.array([0, 0, 1, 1], np.int32),
    ...     n_old_parts=2, n_parts=2, most=np.array([2, 2]))
    >>> moved.moved_cells, moved.moved_weight, moved.least_weight, moved.times_least
    (1, 1.0, 1.0, 1.0)
    """

    overlap: Overlap
    cell_bytes: float
    unit: float
    least: int
    network: Network

    @classmethod
    def of(
        cls,
        home_part: Int32Array,
        cell_part: Int32Array,
        *,
        n_old_parts: int,
        n_parts: int,
        most: Int64Array,
        weight: Int64Array | None = None,
        unit: float = 1.0,
        cell_bytes: float = CELL_BYTES,
        network: Network = NETWORKS[DEFAULT_NETWORK],
        comm: Comm | None = None,
    ) -> Migration:
        """Find what moves.

        Parameters
        ----------
        home_part, cell_part : (n_local,) int32
            Part that holds each cell now, and from now on.
        n_old_parts, n_parts : int
        most : (n_parts,) int64
            The most each new part may weigh; a part that weighs more counts with what it weighs.
        weight : (n_local,) int64, optional
            Quantised; 1 each by default.
        unit, cell_bytes, network
            As the attributes.
        comm : Comm, optional
            Ranks that hold slices of the cells.

        Raises
        ------
        InputError
            If `cell_bytes` is no finite number >= 0.
        """
        if not isfinite(cell_bytes) or cell_bytes < 0:
            raise InputError(f"cell_bytes is {cell_bytes}; wanted a finite number >= 0")
        overlap = Overlap.of(
            home_part, cell_part, n_old_parts=n_old_parts, n_parts=n_parts, weight=weight, comm=comm
        )
        return cls.of_overlap(overlap, most=most, unit=unit, cell_bytes=cell_bytes, network=network)

    @classmethod
    def of_overlap(
        cls,
        overlap: Overlap,
        *,
        most: Int64Array,
        unit: float = 1.0,
        cell_bytes: float = CELL_BYTES,
        network: Network = NETWORKS[DEFAULT_NETWORK],
    ) -> Migration:
        """Find what moves from the table of pairs; see `of`."""
        home = _summed(overlap.old, overlap.weight, overlap.n_old_parts)
        held = _summed(overlap.new, overlap.weight, overlap.n_parts)
        least = least_moved(home, np.maximum(most, held))
        return cls(overlap, float(cell_bytes), float(unit), least, network)

    @property
    def n_old_parts(self) -> int:
        """Number of old parts."""
        return self.overlap.n_old_parts

    @property
    def n_parts(self) -> int:
        """Number of new parts."""
        return self.overlap.n_parts

    @property
    def cells(self) -> csr_array:
        """Cells that old part p gives to new part q, (n_old_parts, n_parts); p = q stay."""
        return self.overlap.matrix(self.overlap.cells)

    @property
    def weight(self) -> csr_array:
        """Their weight, float64."""
        return self.overlap.matrix(self.overlap.weight * self.unit)

    @property
    def bytes(self) -> csr_array:
        """Bytes they take along, float64; nothing for what stays."""
        return self.overlap.matrix(np.where(self._moves, self.overlap.cells * self.cell_bytes, 0.0))

    @cached_property
    def _moves(self) -> Array:
        """Which pairs move."""
        return np.asarray(self.overlap.old != self.overlap.new)

    def _moved(self, by: Int32Array, values: Array, count: int) -> Array:
        """Add up values of the pairs that move."""
        return _summed(by[self._moves], values[self._moves], count)

    @property
    def sent_cells(self) -> Int64Array:
        """Cells that leave each old part, (n_old_parts,)."""
        return self._moved(self.overlap.old, self.overlap.cells, self.n_old_parts)

    @property
    def received_cells(self) -> Int64Array:
        """Cells that come to each new part, (n_parts,)."""
        return self._moved(self.overlap.new, self.overlap.cells, self.n_parts)

    @property
    def moved_cells(self) -> int:
        """Cells that move."""
        return int(self.overlap.cells[self._moves].sum())

    @property
    def moved_bytes(self) -> float:
        """Bytes that move."""
        return self.moved_cells * self.cell_bytes

    @property
    def moved_weight(self) -> float:
        """Weight that moves."""
        return float(self.overlap.weight[self._moves].sum() * self.unit)

    @property
    def least_weight(self) -> float:
        """Weight that every split as balanced as this one must move."""
        return self.least * self.unit

    @property
    def times_least(self) -> float | None:
        """Moved weight as a multiple of the least; None if nothing has to move."""
        return self.moved_weight / self.least_weight if self.least else None

    @property
    def moved_share(self) -> float:
        """Share of the whole weight that moves, 0 to 1."""
        total = float(self.overlap.weight.sum() * self.unit)
        return self.moved_weight / total if total > 0 else 0.0

    @property
    def messages(self) -> int:
        """Pairs of different parts that exchange cells."""
        return int(np.count_nonzero(self._moves))

    @property
    def part_seconds(self) -> FloatArray:
        """Predicted seconds of each part, (larger of both numbers of parts,) float64."""
        count = max(self.n_old_parts, self.n_parts)
        seconds = self.network.latency + self.overlap.cells * (
            self.cell_bytes / self.network.bandwidth
        )
        out = self._moved(self.overlap.old, seconds, count)
        into = self._moved(self.overlap.new, seconds, count)
        return np.maximum(out, into)

    @property
    def seconds(self) -> float:
        """Predicted seconds of the busiest part."""
        return float(self.part_seconds.max(initial=0.0))

    @property
    def busiest_part(self) -> int:
        """The part that takes longest, the lowest of equal ones; -1 if nothing moves."""
        return int(np.argmax(self.part_seconds)) if self.moved_cells else -1

    def to_json_dict(self) -> dict[str, Any]:
        """Return all figures, and the pairs that move, as plain values."""
        moves, pairs = self._moves, self.overlap
        sent, received = self.sent_cells, self.received_cells
        most_cells = int(max(sent.max(initial=0), received.max(initial=0)))
        return {
            "n_old_parts": self.n_old_parts,
            "n_parts": self.n_parts,
            "moved_cells": self.moved_cells,
            "moved_bytes": self.moved_bytes,
            "moved_weight": self.moved_weight,
            "moved_share": self.moved_share,
            "least_weight": self.least_weight,
            "times_least": self.times_least,
            "messages": self.messages,
            "busiest_part": self.busiest_part,
            "busiest_cells": most_cells,
            "busiest_bytes": most_cells * self.cell_bytes,
            "seconds": self.seconds,
            "cell_bytes": self.cell_bytes,
            "network": self.network.name,
            "sent_cells": sent.tolist(),
            "received_cells": received.tolist(),
            "pairs": {
                "from": pairs.old[moves].tolist(),
                "to": pairs.new[moves].tolist(),
                "cells": pairs.cells[moves].tolist(),
                "weight": (pairs.weight[moves] * self.unit).tolist(),
            },
        }


def _summed(by: Int32Array, values: Array, count: int) -> Array:
    """Add up values by part, in their own dtype."""
    sums = np.zeros(count, values.dtype)
    np.add.at(sums, by, values)
    return sums
