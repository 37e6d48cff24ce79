"""Who owns which cell: a directory of global cell numbers, spread over the ranks in blocks.

The range of the numbers is cut into `size` equal blocks; each rank keeps the owners of one block,
sorted, and answers questions about it. No array is longer than the numbers that occur in a block,
so numbers may have gaps; where nearly all fall into few blocks, those ranks hold more than a fair
share.

Cost: one exchange to build (8 bytes a cell), two to ask (12 bytes a question), a sort of each.
Source: common practice, no source.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise
from typing import TYPE_CHECKING, cast

import numpy as np

from sfcpart.dtypes import GID, OFFSET, PART, Array, Int32Array, Int64Array
from sfcpart.errors import InputError

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["Blocks", "Directory", "cut"]


def cut(array: Array, edge: Int64Array) -> list[Array]:
    """Cut an array into one piece for each rank."""
    return [array[start:stop] for start, stop in pairwise(edge.tolist())]


@dataclass(frozen=True)
class Blocks:
    """Equal blocks of the range of all cell numbers, one a rank.

    Attributes
    ----------
    low : int
        Lowest number.
    length : int
        Numbers in a block.
    size : int
        Ranks.
    """

    low: int
    length: int
    size: int

    @classmethod
    def of(cls, cell_gid: Int64Array, *, comm: Comm) -> Blocks:
        """Find the range of the numbers of all ranks."""
        top = np.iinfo(GID).max
        ends = [cell_gid.min(initial=top), top - cell_gid.max(initial=0)]
        low, below_top = (int(end) for end in comm.allreduce(np.array(ends, GID), "min"))
        low = min(low, top - below_top)  # no cell anywhere: an empty range from 0
        return cls(low, (top - below_top - low) // comm.size + 1, comm.size)

    def edges(self, gid: Int64Array) -> Int64Array:
        """Return where ascending numbers must be cut into blocks, (size + 1,)."""
        home = np.clip((gid - self.low) // self.length, 0, self.size - 1)
        return np.searchsorted(home, np.arange(self.size + 1)).astype(OFFSET)


@dataclass(frozen=True, eq=False)
class Directory:
    """One block of the directory: that of this rank.

    Attributes
    ----------
    comm : Comm
    blocks : Blocks
    gid : (n_block,) int64, ascending
    owner : (n_block,) int32
    """

    comm: Comm
    blocks: Blocks
    gid: Int64Array
    owner: Int32Array

    @classmethod
    def of(cls, cell_gid: Int64Array, *, comm: Comm) -> Directory:
        """Register the owned cells of all ranks, given ascending.

        Raises
        ------
        InputError
            If two ranks own the same cell.
        """
        blocks = Blocks.of(cell_gid, comm=comm)
        pieces = comm.alltoall(cut(cell_gid, blocks.edges(cell_gid)))
        gid = np.concatenate(pieces)
        owner = np.repeat(np.arange(comm.size, dtype=PART), [len(piece) for piece in pieces])
        order = np.argsort(gid, kind="stable")
        gid, owner = gid[order], owner[order]
        comm.check(_owned_twice(gid, owner))
        return cls(comm, blocks, gid, owner)

    def owners(self, gid: Int64Array) -> Int32Array:
        """Return the owners of ascending cell numbers.

        Raises
        ------
        InputError
            If nobody owns a cell that some rank asks for.
        """
        asked = self.comm.alltoall(cut(gid, self.blocks.edges(gid)))
        answers = self.comm.alltoall([self._answer(piece) for piece in asked])
        owner = np.concatenate(answers)
        self.comm.check(_nobodys(gid, owner, self.comm.rank))
        return cast(Int32Array, owner)

    def _answer(self, gid: Int64Array) -> Int32Array:
        """Look owners up in this block; -1 for cells of nobody."""
        at = np.searchsorted(self.gid, gid)
        known = at < len(self.gid)
        known[known] = self.gid[at[known]] == gid[known]
        owner = np.full(len(gid), -1, PART)
        owner[known] = self.owner[at[known]]
        return owner


def _owned_twice(gid: Int64Array, owner: Int32Array) -> InputError | None:
    """Return an error if a cell has two owners."""
    twice = np.flatnonzero(gid[1:] == gid[:-1])
    if not len(twice):
        return None
    first, second = owner[twice[0] : twice[0] + 2]
    return InputError(
        f"ranks {first} and {second} both own cell {gid[twice[0]]}; wanted one owner a cell"
    )


def _nobodys(gid: Int64Array, owner: Int32Array, rank: int) -> InputError | None:
    """Return an error if a cell has no owner."""
    unknown = np.flatnonzero(owner < 0)
    if not len(unknown):
        return None
    return InputError(
        f"rank {rank} needs cell {gid[unknown[0]]}, which no rank owns; "
        "wanted neighbours among the cells of all ranks (-1 for none)"
    )
