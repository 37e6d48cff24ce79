"""Carry out a migration that a re-split left in a file: rank r holds part r.

Each rank reads what its part sends and receives (`sfcpart.read_moves`), and its arrays go where
the lists say. What arrives is checked against the lists: a file of another mesh, or arrays of
another split, are found out.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import adopt
from sfcpart.dtypes import Array, Int64Array
from sfcpart.errors import InputError
from sfcpart.parallel.columns import Ragged
from sfcpart.parallel.migrate import migrate
from sfcpart.slices.gate import agreed, checked_gids, sorted_gids

if TYPE_CHECKING:
    from sfcpart.files.parts.moves import PartMoves

__all__ = ["carry_out"]


def carry_out(
    moves: PartMoves,
    arrays: Mapping[str, Array | Ragged | tuple[ArrayLike, Array]],
    *,
    comm: Any,
    cell_gid: str = "cell_gid",
    chunk_bytes: int = 1 << 26,
) -> dict[str, Any]:
    """Send the rows of the cells that move to their new part's rank; all ranks together.

    Parameters
    ----------
    moves : PartMoves
        What part number `comm.rank` sends and receives. Ranks beyond the old parts hold no cells,
        those beyond the new ones none afterwards.
    arrays : mapping of names to arrays or (indptr, data)
        As for `migrate`: one row for each cell of this rank.
    comm : mpi4py communicator, or Comm
        At least as many ranks as parts, before and after.
    cell_gid : str
        Name of the array of global cell numbers (those of the mesh that was split); cells are in
        their order on arrival.
    chunk_bytes : int
        As for `migrate`.

    Returns
    -------
    dict
        Under the same names, what this rank holds from now on.

    Raises
    ------
    InputError
        If the lists are those of another part or of other cells, or there are too few ranks. All
        ranks raise it alike.

    Notes
    -----
    O(n log n) time for n local cells, and what `migrate` takes.

    Examples
    --------
    >>> import tempfile
    >>> from sfcpart import read_moves
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.files.parts.moves import write_moves
    >>> old, new = np.array([0, 0, 1], np.int32), np.array([0, 1, 1], np.int32)
    >>> def act(comm, folder):
    ...     mine = {"cell_gid": np.flatnonzero(old == comm.rank)}
    ...     return carry_out(read_moves(folder, comm.rank), mine, comm=comm)["cell_gid"].tolist()
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     path = f"{folder}/migration.h5"
    ...     write_moves(path, old, new, n_old_parts=2, n_parts=2, cell_bytes=200.0)
    ...     run_ranks(2, lambda comm: act(comm, folder))
    [[0], [1, 2]]
    """
    comm = adopt(comm)
    goal = agreed(comm, lambda: _destination(moves, arrays, cell_gid, comm.rank, comm.size))
    here = migrate(arrays, destination=goal, comm=comm, order_by=cell_gid, chunk_bytes=chunk_bytes)
    wanted = np.sort(np.concatenate([np.asarray(arrays[cell_gid])[goal == comm.rank],
                                     moves.receive_gid]))  # fmt: skip
    agreed(comm, lambda: _check_arrival(here[cell_gid], wanted, moves.part))
    return here


def _destination(
    moves: PartMoves, arrays: Mapping[str, Any], name: str, rank: int, size: int
) -> Int64Array:
    """Return the rank each local cell goes to."""
    if size < max(moves.n_old_parts, moves.n_parts):
        raise InputError(
            f"{size} ranks for {moves.n_old_parts} parts before and {moves.n_parts} after; "
            "wanted a rank for each"
        )
    if moves.part != rank:
        raise InputError(f"rank {rank} was given the lists of part {moves.part}; wanted its own")
    if name not in arrays:
        raise InputError(f"there is no array {name!r} of cell numbers; name the one there is")
    gid, row = sorted_gids(checked_gids(arrays[name], name))
    goal = np.full(len(gid), rank, np.int64)
    if not len(moves.send_gid):
        return goal
    at = np.minimum(np.searchsorted(gid, moves.send_gid), max(0, len(gid) - 1))
    missing = np.flatnonzero(gid[at] != moves.send_gid) if len(gid) else [0]
    if len(missing):
        raise InputError(
            f"part {rank} is to send cell {moves.send_gid[missing[0]]}, which it does not hold; "
            "wanted the arrays of the old split"
        )
    goal[row[at]] = np.repeat(moves.send_part, np.diff(moves.send_indptr))
    return goal


def _check_arrival(gid: Int64Array, wanted: Int64Array, part: int) -> None:
    """Refuse arrivals that the lists do not tell of."""
    if not np.array_equal(gid, wanted):
        raise InputError(
            f"part {part} has {len(gid)} cells after the migration, not the {len(wanted)} of its "
            "lists; wanted all lists of one file"
        )
