"""Split cells that are spread over ranks again, so that few of them change their rank."""

from __future__ import annotations

from collections.abc import Sequence
from math import isfinite
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import adopt
from sfcpart.dtypes import PART, Int32Array
from sfcpart.errors import InputError, PartitionError
from sfcpart.parallel.split import (
    LocalWish,
    by_number,
    checked_wish,
    gathered,
    method_without_graph,
    one_a_cell,
    problem_of,
    quantised,
    refuse_differences,
)
from sfcpart.slices.gate import agreed, checked_gids

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm
    from sfcpart.measure.step_model import StepModel
    from sfcpart.resplit.migration import Migration
    from sfcpart.resplit.relabel import Keep

__all__ = ["LocalResplit", "resplit_local"]


class LocalResplit(NamedTuple):
    """A new split of the cells of all ranks.

    Attributes
    ----------
    cell_part : (n_local,) int32
        New part of each local cell: where `migrate` sends it if parts are ranks.
    migration : Migration
        What moves, alike on all ranks.

    Examples
    --------
    >>> from sfcpart.comm import SerialComm
    >>> resplit_local([[0.0], [1.0]], comm=SerialComm()).migration.moved_cells
    0
    """

    cell_part: Int32Array
    migration: Migration


def resplit_local(
    centers: ArrayLike,
    home_part: ArrayLike | None = None,
    *,
    comm: Any,
    way: str = "shift",
    n_parts: int | None = None,
    weights: ArrayLike | None = None,
    speeds: ArrayLike | None = None,
    limit_weights: ArrayLike | None = None,
    limits: ArrayLike | None = None,
    levels: Sequence[int] | None = None,
    together: ArrayLike | None = None,
    cell_gid: ArrayLike | None = None,
    method: str = "hilbert",
    tolerance: float = 0.03,
    keep: Keep = "total",
    cell_bytes: float = 200.0,
    step_model: StepModel | None = None,
) -> LocalResplit:
    """Divide the cells of all ranks again so that little moves; all ranks together.

    Parameters
    ----------
    centers : (n_local, dim) float64
        Centres of this rank's cells, dim 1 to 3; (0, dim) for a rank without cells.
    home_part : (n_local,) integers, optional
        Part that holds each cell now; by default this rank's number.
    comm : mpi4py communicator, or Comm
    way : {"shift", "scratch"}
        Shift the cuts along the curve, or split from scratch and rename; as `sfcpart.rebalance`.
    n_parts : int, optional
        One for each rank of `comm` by default.
    weights, speeds, limit_weights, limits, levels, together, cell_gid, method
        As for `split_local`.
    tolerance, keep, cell_bytes, step_model
        As for `sfcpart.rebalance`.

    Returns
    -------
    LocalResplit

    Raises
    ------
    InputError, WeightError, PartitionError
        If something is malformed or cannot be met. All ranks raise it alike.

    Notes
    -----
    As `split_local`; beside its cells a rank holds the places that cuts may take.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> def act(comm):  # two ranks hold a row of eight cells; those of rank 1 became heavy
    ...     centers = np.column_stack([np.arange(4) + 4 * comm.rank, np.zeros(4)])
    ...     new = resplit_local(centers, comm=comm, weights=np.full(4, 1 + 2 * comm.rank))
    ...     return new.cell_part.tolist(), new.migration.moved_cells
    >>> run_ranks(2, act)
    [([0, 0, 0, 0], 1), ([0, 1, 1, 1], 1)]
    """
    comm = adopt(comm)
    wanted = comm.size if n_parts is None else n_parts
    given = agreed(
        comm,
        lambda: checked_wish(
            centers, weights, limit_weights, together, wanted, speeds, limits, levels
        )._replace(tolerance=_tolerance(tolerance)),
    )
    refuse_differences(given, cell_gid is not None, f"{way} {method} {tolerance} {keep}", comm)
    agreed(comm, lambda: _check(way, keep, method))
    home = agreed(comm, lambda: _home(home_part, len(given.centers), comm.rank))
    given = quantised(given, comm)
    price = _Price(way, method, keep, cell_bytes, step_model)
    if cell_gid is None:
        return _resplit(given, home, price, comm)
    gids = agreed(comm, lambda: one_a_cell(cell_gid, "cell_gid", len(given.centers)))
    line = by_number(checked_gids(gids, "cell_gid"), comm)
    found = _resplit(gathered(given, line), line.gather(home), price, comm)
    return found._replace(cell_part=np.asarray(line.scatter(found.cell_part)))


class _Price(NamedTuple):
    """How to split again and what moving costs."""

    way: str
    method: str
    keep: Keep
    cell_bytes: float
    step_model: StepModel | None


def _resplit(given: LocalWish, home: Int32Array, price: _Price, comm: Comm) -> LocalResplit:
    """Split again in the order in which ranks hold the cells."""
    from sfcpart.measure.step_model import StepModel
    from sfcpart.resplit.task import Task
    from sfcpart.resplit.ways import WAYS

    highest = int(comm.allreduce(np.array([home.max(initial=0)], np.int64), "max")[0])
    task = Task(
        problem=problem_of(given, comm),
        home_part=home,
        n_old_parts=max(highest + 1, comm.size if highest < comm.size else 0),
        method=price.method,
        keep=price.keep,
        cell_bytes=price.cell_bytes,
        step_model=price.step_model or StepModel(),
    )
    cell_part = WAYS[price.way].run(task)
    return LocalResplit(cell_part, task.migration(cell_part))


def _home(home_part: ArrayLike | None, n_local: int, rank: int) -> Int32Array:
    """Return the part that holds each cell."""
    if home_part is None:
        return np.full(n_local, rank, PART)
    home = checked_gids(one_a_cell(home_part, "home_part", n_local), "home_part")
    wrong = np.flatnonzero((home < 0) | (home > np.iinfo(PART).max))
    if len(wrong):
        raise PartitionError(f"cell {wrong[0]} is at home in part {home[wrong[0]]}; wanted >= 0")
    return home.astype(PART)


def _tolerance(tolerance: float) -> float:
    """Return a finite tolerance >= 0."""
    if not isinstance(tolerance, int | float) or not isfinite(tolerance) or tolerance < 0:
        raise InputError(f"tolerance is {tolerance!r}; wanted a number >= 0, such as 0.03 for 3 %")
    return float(tolerance)


def _check(way: str, keep: str, method: str) -> None:
    """Refuse ways that need the cell graph, and unknown ones."""
    if way not in ("shift", "scratch"):
        raise InputError(f"way is {way!r}; wanted shift or scratch")
    if keep not in ("total", "busiest"):
        raise InputError(f"keep is {keep!r}; wanted total or busiest")
    method_without_graph(method)
