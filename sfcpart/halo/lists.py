"""The exchange lists of all parts as one frozen value."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, TypeAlias

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array, IntArray
from sfcpart.errors import InputError

__all__ = ["Across", "Halo"]

Across: TypeAlias = Literal["faces", "points"]


@dataclass(frozen=True, eq=False)
class Halo:
    """Owned cells, halo cells and exchange lists of every part (CSR by part, read-only).

    Locally, part p numbers its owned cells first (`owned`, in curve order) and then its halo
    cells (`halo`, grouped by owner in ascending order, within an owner in that owner's local
    order). "Pair" k is one direction between two parts: pair k of part p is with part
    `neighbour[k]`, for k in `neighbour_indptr[p]:neighbour_indptr[p + 1]`.

    Symmetry: what p receives from q is, cell by cell, what q sends to p.

    Attributes
    ----------
    n_parts : int
        Parts whose lists these are: all of the partition, or those that a rank owns, from
        `first_part` on. CSR by part is by part less `first_part`; what names parts and cells does
        so by their numbers in the whole mesh.
    layers : int
    across : "faces" or "points"
    owned_indptr : (n_parts + 1,) int64
    owned : (n_cells,) int32 or int64
        Cells of each part in curve order.
    halo_indptr : (n_parts + 1,) int64
    halo : (n_halo,) int32 or int64
        Foreign cells each part needs.
    neighbour_indptr : (n_parts + 1,) int64
    neighbour : (n_pairs,) int32
        Parts each part exchanges with, ascending.
    receive_indptr : (n_pairs + 1,) int64
        Rows of `halo` that each pair receives.
    send_indptr : (n_pairs + 1,) int64
    send : (n_halo,) int32 or int64
        Local numbers of the owned cells that each pair sends.
    first_part : int
        The lowest of these parts.
    """

    n_parts: int
    layers: int
    across: Across
    owned_indptr: Int64Array
    owned: IntArray
    halo_indptr: Int64Array
    halo: IntArray
    neighbour_indptr: Int64Array
    neighbour: Int32Array
    receive_indptr: Int64Array
    send_indptr: Int64Array
    send: IntArray
    first_part: int = 0

    @property
    def n_cells(self) -> int:
        """Number of cells of these parts."""
        return len(self.owned)

    def owned_cells(self, part: int) -> IntArray:
        """Return the cells part `part` owns, in local order."""
        return self.owned[self._row(self.owned_indptr, part)]

    def halo_cells(self, part: int) -> IntArray:
        """Return the foreign cells part `part` needs, in local order."""
        return self.halo[self._row(self.halo_indptr, part)]

    def neighbours(self, part: int) -> Int32Array:
        """Return the parts that part `part` exchanges with, ascending."""
        return self.neighbour[self._row(self.neighbour_indptr, part)]

    def send_list(self, part: int, to: int) -> IntArray:
        """Return the local numbers of the cells that `part` sends to `to`, in order."""
        pair = self._pair(part, to)
        return self.send[self.send_indptr[pair] : self.send_indptr[pair + 1]]

    def receive_list(self, part: int, source: int) -> Int64Array:
        """Return the local numbers of the cells that `part` receives from `source`, in order."""
        pair = self._pair(part, source)
        offset = len(self.owned_cells(part)) - self.halo_indptr[part - self.first_part]
        first, last = self.receive_indptr[pair : pair + 2]
        return np.arange(first + offset, last + offset, dtype=np.int64)

    def _row(self, indptr: Int64Array, part: int) -> slice:
        """Return where the row of a part stands."""
        row = part - self.first_part
        return slice(int(indptr[row]), int(indptr[row + 1]))

    def _pair(self, part: int, other: int) -> int:
        """Return the pair of `part` with its neighbour `other`."""
        first = int(self.neighbour_indptr[part - self.first_part])
        near = self.neighbours(part)
        at = int(np.searchsorted(near, other))
        if at == len(near) or near[at] != other:
            raise InputError(
                f"parts {part} and {other} exchange nothing; the neighbours of part {part} are "
                f"{near.tolist()}"
            )
        return first + at
