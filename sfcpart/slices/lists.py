"""Who sends which cells to whom, found from the cell numbers that each rank needs.

The halo of a rank is grouped by owner, ascending, and sorted by `cell_gid` within an owner, so
that what comes from one owner is one stretch of rows. The owner sends in that same order.

Cost: a few exchanges with the ranks of the directory, sorts of the owned and the needed numbers.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import OFFSET, Array, Int32Array, Int64Array
from sfcpart.errors import InputError
from sfcpart.slices.directory import Directory, cut
from sfcpart.slices.gate import agreed, checked_gids, sorted_gids

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm, Stretch

__all__ = ["ExchangeLists", "ExchangePlan"]

L = TypeVar("L", bound="ExchangeLists")


@dataclass(frozen=True, eq=False)
class ExchangeLists:
    """Which rows a rank sends to whom, and which it gets (read-only).

    Attributes
    ----------
    n_owned : int
        Owned cells: local rows 0 to n_owned - 1.
    halo_gid : (n_halo,) int64
        Cells of others that are needed: local rows from n_owned on; by owner, then number.
    source : (n_sources,) int32, ascending
        Ranks that own them.
    source_indptr : (n_sources + 1,) int64
        Rows of `halo_gid` that come from each source.
    target : (n_targets,) int32, ascending
        Ranks that need owned cells.
    target_indptr : (n_targets + 1,) int64
        Rows of `send` that go to each target.
    send : (n_send,) int64
        Local rows that are sent; by target, then cell number. A cell may go to several targets.
    """

    n_owned: int
    halo_gid: Int64Array
    source: Int32Array
    source_indptr: Int64Array
    target: Int32Array
    target_indptr: Int64Array
    send: Int64Array

    @classmethod
    def of_blocks(cls, halo_gid: Int64Array, *, first: Int64Array, comm: Comm) -> ExchangeLists:
        """Make the lists where rank r owns cells `first[r]` to `first[r + 1] - 1`.

        Parameters
        ----------
        halo_gid : (n_halo,) int64, ascending
            Needed cells of others.
        first : (size + 1,) int64
        comm : Comm

        Notes
        -----
        One exchange of 8 bytes a halo cell.

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> def act(comm):  # four cells, two a rank; rank 1 needs one of rank 0
        ...     needed = np.array([[], [1]][comm.rank], np.int64)
        ...     return ExchangeLists.of_blocks(needed, first=np.array([0, 2, 4]), comm=comm)
        >>> run_ranks(2, act)[0].targets()
        [(1, 0, 1)]
        """
        edge = np.searchsorted(halo_gid, first).astype(OFFSET)
        wanted = comm.alltoall(cut(halo_gid, edge))
        start = int(first[comm.rank])
        n_owned = int(first[comm.rank + 1]) - start
        return _lists(cls, n_owned, halo_gid, np.diff(edge), wanted, lambda gid: gid - start)

    @property
    def n_halo(self) -> int:
        """Number of cells of others that this rank needs."""
        return len(self.halo_gid)

    def sources(self) -> list[Stretch]:
        """Return (rank, first row, row after) of the halo rows that come from each source.

        Examples
        --------
        >>> from sfcpart.comm import SerialComm
        >>> ExchangePlan.of([], cell_gid=[3, 1], comm=SerialComm()).sources()
        []
        """
        return _stretches(self.source, self.source_indptr)

    def targets(self) -> list[Stretch]:
        """Return (rank, first row, row after) of the rows of `send` that go to each target.

        Examples
        --------
        >>> from sfcpart.comm import SerialComm
        >>> ExchangePlan.of([], cell_gid=[3, 1], comm=SerialComm()).targets()
        []
        """
        return _stretches(self.target, self.target_indptr)


@dataclass(frozen=True, eq=False)
class ExchangePlan(ExchangeLists):
    """The exchange lists of a rank whose cells have any global numbers (read-only).

    Attributes
    ----------
    n_owned : int
        Owned cells: local rows 0 to n_owned - 1, in the order of `cell_gid`.
    halo_gid : (n_halo,) int64
        Cells of others that are needed: local rows from n_owned on; by owner, then number.
    source, target : int32, ascending
        Ranks that own needed cells; ranks that need owned ones.
    source_indptr, target_indptr : int64
        Rows of `halo_gid` that come from each source; rows of `send` that go to each target.
    send : (n_send,) int64
        Local rows that are sent; by target, then cell number. A cell may go to several targets.
    known_gid, known_row : (n_owned + n_halo,) int64
        All local cells, ascending, and their local rows.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> def act(comm):  # each rank owns two of four cells; rank 1 needs one of rank 0
    ...     needed = [[], [1]][comm.rank]
    ...     return ExchangePlan.of(needed, cell_gid=2 * comm.rank + np.arange(2), comm=comm)
    >>> first, second = run_ranks(2, act)
    >>> first.targets(), first.send.tolist(), second.sources(), second.halo_gid.tolist()
    ([(1, 0, 1)], [1], [(0, 0, 1)], [1])
    """

    known_gid: Int64Array
    known_row: Int64Array

    @classmethod
    def of(cls, needed_gid: ArrayLike, *, cell_gid: ArrayLike, comm: Comm) -> ExchangePlan:
        """Find owners and make the lists; all ranks together.

        Parameters
        ----------
        needed_gid : (n,) integers
            Cells this rank needs, in any order; owned ones, doubles and negatives are ignored.
        cell_gid : (n_owned,) integers
            Cells this rank owns; all ranks together own each cell once.
        comm : Comm

        Returns
        -------
        ExchangePlan

        Raises
        ------
        InputError
            If cells are owned twice, or needed and owned by nobody.

        Examples
        --------
        >>> from sfcpart.comm import SerialComm
        >>> ExchangePlan.of([3, -1], cell_gid=[3, 4], comm=SerialComm()).n_halo
        0
        """
        owned = agreed(comm, lambda: checked_gids(cell_gid, "cell_gid"))
        gid, row = agreed(comm, lambda: sorted_gids(owned))
        needed = agreed(comm, lambda: _foreign(checked_gids(needed_gid, "needed_gid"), gid))
        owner = Directory.of(gid, comm=comm).owners(needed)
        halo = needed[np.argsort(owner, kind="stable")]
        count = np.bincount(owner, minlength=comm.size)
        wanted = comm.alltoall(cut(halo, _before(count)))
        known = np.concatenate([owned, halo])
        order = np.argsort(known, kind="stable")
        return _lists(
            cls,
            len(owned),
            halo,
            count,
            wanted,
            lambda asked: row[np.searchsorted(gid, asked)],
            known_gid=known[order],
            known_row=order,
        )

    def local_rows(self, gid: ArrayLike) -> Int64Array:
        """Return the local row of each cell number, of any shape; negatives give -1.

        Parameters
        ----------
        gid : integers of any shape

        Returns
        -------
        int64 of that shape

        Raises
        ------
        InputError
            If a cell is neither owned nor in the halo.

        Examples
        --------
        >>> from sfcpart.comm import SerialComm
        >>> plan = ExchangePlan.of([], cell_gid=[3, 1], comm=SerialComm())
        >>> plan.local_rows([[1, -1], [3, 1]]).tolist()
        [[1, -1], [0, 1]]
        """
        asked = np.asarray(gid)
        flat = checked_gids(asked.reshape(-1), "gid")
        at = np.searchsorted(self.known_gid, flat)
        found = at < len(self.known_gid)
        found[found] = self.known_gid[at[found]] == flat[found]
        strange = np.flatnonzero(~found & (flat >= 0))
        if len(strange):
            raise InputError(
                f"cell {flat[strange[0]]} is neither owned nor in the halo of this rank; "
                "build the halo from all cells that are needed"
            )
        row = np.full(len(flat), -1, np.int64)
        row[found] = self.known_row[at[found]]
        return row.reshape(asked.shape)


def _foreign(needed: Int64Array, owned: Int64Array) -> Int64Array:
    """Return the needed cells that are not owned, ascending, each once."""
    needed = np.unique(needed[needed >= 0])
    return needed[~np.isin(needed, owned, assume_unique=True)]


def _before(count: Array) -> Int64Array:
    """Return the sums before each entry and the total."""
    return np.concatenate(([0], np.cumsum(count))).astype(OFFSET)


def _stretches(rank: Int32Array, indptr: Int64Array) -> list[Stretch]:
    """Return (rank, first row, row after) of each."""
    return list(zip(rank.tolist(), indptr[:-1].tolist(), indptr[1:].tolist(), strict=True))


def _lists(
    kind: type[L],
    n_owned: int,
    halo_gid: Int64Array,
    count: Array,
    wanted: list[Array],
    rows_of: Callable[[Int64Array], Int64Array],
    **known: Int64Array,
) -> L:
    """Freeze the lists of `count[r]` halo cells from, and the `wanted[r]` of, each rank r."""
    source, target = np.flatnonzero(count), np.flatnonzero([len(piece) for piece in wanted])
    arrays: dict[str, Any] = {
        "halo_gid": halo_gid,
        "source": source.astype(np.int32),
        "source_indptr": _before(count[source]),
        "target": target.astype(np.int32),
        "target_indptr": _before(np.array([len(wanted[rank]) for rank in target])),
        "send": rows_of(np.concatenate(wanted)),
        **known,
    }
    for array in arrays.values():
        array.flags.writeable = False
    return kind(n_owned=n_owned, **arrays)
