"""Split cells that are spread over ranks, from their centres and weights alone."""

from __future__ import annotations

import zlib
from collections.abc import Sequence
from typing import TYPE_CHECKING, Any, NamedTuple, cast

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import adopt
from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array
from sfcpart.errors import InputError, WeightError
from sfcpart.slices.directory import Blocks, Directory, cut
from sfcpart.slices.gate import agreed, checked_gids, sorted_gids

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm
    from sfcpart.curve import CurveSlice
    from sfcpart.graph import CellGraph

__all__ = [
    "LocalWish",
    "by_number",
    "checked_wish",
    "gathered",
    "method_without_graph",
    "one_a_cell",
    "problem_of",
    "quantised",
    "refuse_differences",
    "split_local",
]


class LocalWish(NamedTuple):
    """What this rank gave, checked: its cells, and what all ranks share."""

    centers: FloatArray
    weight: Array | None
    limit_weight: Array | None
    group: Int64Array | None
    n_parts: int
    part_speed: FloatArray
    part_limit: Array | None
    level_sizes: tuple[int, ...]
    limit_unit: float = 1.0
    weight_unit: float = 1.0
    tolerance: float = 0.03


def split_local(
    centers: ArrayLike,
    *,
    comm: Any,
    n_parts: int | None = None,
    weights: ArrayLike | None = None,
    speeds: ArrayLike | None = None,
    limit_weights: ArrayLike | None = None,
    limits: ArrayLike | None = None,
    levels: Sequence[int] | None = None,
    together: ArrayLike | None = None,
    cell_gid: ArrayLike | None = None,
    method: str = "hilbert",
) -> Int32Array:
    """Divide the cells of all ranks into parts of equal work; all ranks together.

    Parameters
    ----------
    centers : (n_local, dim) float64
        Centres of this rank's cells, dim 1 to 3; (0, dim) for a rank without cells.
    comm : mpi4py communicator, or Comm
    n_parts : int, optional
        Number of parts; by default one for each rank of `comm`.
    weights : (n_local,) numbers, optional
        Work of each cell, >= 0; 1 each by default. All ranks give them or none does.
    speeds : (n_parts,) numbers, optional
        Relative speed of each part's rank, > 0, alike on all ranks.
    limit_weights, limits : optional
        A second weight of each local cell (1 each by default) and the most of it that a part may
        hold, one number or one a part, alike on all ranks: memory, for instance.
    levels : sequence of int, optional
        Nested levels such as (4, 16): nodes, then cores; their product is the number of parts.
    together : (n_local,) integers, optional
        Cells of all ranks with equal numbers stay in one part; negatives are free.
    cell_gid : (n_local,) integers, optional
        Global cell numbers. With them the answer does not depend on which rank holds which cell:
        ties between coincident centres go by number. Without, they go by rank and local row.
    method : str
        A name of `sfcpart.methods.registry.METHODS` that needs no cell graph.

    Returns
    -------
    (n_local,) int32
        Part of each local cell. A part is empty only if there are fewer cells than parts.

    Raises
    ------
    InputError, WeightError, PartitionError
        If something is malformed or cannot be met. All ranks raise it alike.

    Notes
    -----
    O(n_local log n) time; no rank holds more than its cells and as long a stretch of the curve
    (with the "hilbert" method). A partition changes the order in which a solver sums; it says
    nothing about whether a simulation is right.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> def act(comm):  # two ranks hold a row of eight cells, every second one
    ...     centers = np.column_stack([np.arange(comm.rank, 8, 2), np.zeros(4)])
    ...     return split_local(centers, comm=comm).tolist()
    >>> run_ranks(2, act)
    [[0, 0, 1, 1], [0, 0, 1, 1]]
    """
    comm = adopt(comm)
    wanted = comm.size if n_parts is None else n_parts
    given = agreed(
        comm,
        lambda: checked_wish(
            centers, weights, limit_weights, together, wanted, speeds, limits, levels
        ),
    )
    refuse_differences(given, cell_gid is not None, method, comm)
    run = agreed(comm, lambda: method_without_graph(method))
    given = quantised(given, comm)
    if cell_gid is None:
        return cast(Int32Array, run(problem_of(given, comm)))
    gids = agreed(comm, lambda: one_a_cell(cell_gid, "cell_gid", len(given.centers)))
    line = by_number(checked_gids(gids, "cell_gid"), comm)
    return cast(Int32Array, line.scatter(run(problem_of(gathered(given, line), comm))))


def problem_of(given: LocalWish, comm: Comm) -> Any:
    """Return the problem of cells in the order in which ranks hold them."""
    from sfcpart.methods.problem import Problem

    return Problem(
        centers=given.centers,
        n_parts=given.n_parts,
        part_speed=given.part_speed,
        comm=comm,
        graph=_no_graph,
        first_gid=_first(given, comm),
        weight=given.weight,
        weight_unit=given.weight_unit,
        tolerance=given.tolerance,
        level_sizes=given.level_sizes,
        limit_weight=given.limit_weight,
        part_limit=given.part_limit,
        limit_unit=given.limit_unit,
        group=given.group,
    )


def quantised(given: LocalWish, comm: Comm) -> LocalWish:
    """Turn weights and limits into integers, alike on all ranks."""
    from sfcpart.weights import quantise, quantise_limits

    whole: dict[str, Any] = {"comm": comm, "first_gid": _first(given, comm)}
    if given.weight is not None:
        work = quantise(given.weight, **whole)
        given = given._replace(weight=work.values, weight_unit=work.unit)
    if given.part_limit is None or given.limit_weight is None:
        return given
    second = quantise(given.limit_weight, **whole, what="limited weight")
    limit = quantise_limits(given.part_limit, second.exponent)
    return given._replace(limit_weight=second.values, part_limit=limit, limit_unit=second.unit)


def _first(given: LocalWish, comm: Comm) -> int:
    """Return the number of cells on lower ranks."""
    return int(comm.exscan(np.array([len(given.centers)]))[0])


def by_number(cell_gid: Int64Array, comm: Comm) -> CurveSlice:
    """Return the way of values to ranks that hold consecutive cell numbers, and back."""
    from sfcpart.curve import CurveSlice

    gid, row = agreed(comm, lambda: sorted_gids(cell_gid))
    Directory.of(gid, comm=comm)  # refuses cells that two ranks hold
    edge = Blocks.of(gid, comm=comm).edges(gid)
    pieces = comm.alltoall(cut(gid, edge))
    received = np.array([len(piece) for piece in pieces], np.int64)
    return CurveSlice(comm, row, edge, received, np.argsort(np.concatenate(pieces), kind="stable"))


def gathered(given: LocalWish, line: CurveSlice) -> LocalWish:
    """Bring what is given for each cell to the ranks that hold it by number."""
    columns = [line.gather(np.ascontiguousarray(column)) for column in given.centers.T]
    return given._replace(
        centers=np.stack(columns, axis=1),
        weight=_along(line, given.weight),
        limit_weight=_along(line, given.limit_weight),
        group=_along(line, given.group),
    )


def _along(line: CurveSlice, values: Array | None) -> Array | None:
    """Bring one value a cell, if there is one, to the ranks that hold it by number."""
    return None if values is None else line.gather(values)


def method_without_graph(name: str) -> Any:
    """Return a method that needs no cell graph."""
    from sfcpart.methods.registry import METHODS

    fit = [method.name for method in METHODS.values() if not method.needs_graph]
    if name not in fit:
        raise InputError(
            f"method {name!r} is unknown or needs the cell graph; wanted one of {', '.join(fit)}"
        )
    return METHODS[name].run


def checked_wish(
    centers: ArrayLike,
    weights: ArrayLike | None,
    limit_weights: ArrayLike | None,
    together: ArrayLike | None,
    n_parts: object,
    speeds: ArrayLike | None,
    limits: ArrayLike | None,
    levels: Sequence[int] | None,
) -> LocalWish:
    """Return well-formed input."""
    array = np.ascontiguousarray(centers, np.float64)
    if array.ndim != 2 or not 1 <= array.shape[1] <= 3:
        raise InputError(
            f"centers has shape {array.shape}; wanted one row a cell, (n_local, dim), dim 1 to 3"
        )
    if isinstance(n_parts, bool) or not isinstance(n_parts, int | np.integer) or n_parts < 1:
        raise InputError(f"n_parts is {n_parts!r}; wanted a whole number, 1 or more")
    n_parts, n_local = int(n_parts), len(array)
    group = None if together is None else one_a_cell(together, "together", n_local)
    return LocalWish(
        centers=array,
        weight=None if weights is None else one_a_cell(weights, "weights", n_local),
        limit_weight=_second_weight(limit_weights, limits, n_local),
        group=None if group is None else checked_gids(group, "together"),
        n_parts=n_parts,
        part_speed=np.ones(n_parts) if speeds is None else np.asarray(speeds, np.float64),
        part_limit=None if limits is None else _one_a_part(limits, n_parts),
        level_sizes=() if levels is None else tuple(int(size) for size in levels),
    )


def _second_weight(
    limit_weights: ArrayLike | None, limits: ArrayLike | None, n_local: int
) -> Array | None:
    """Return the limited weight of each cell, None where nothing is limited."""
    if limits is None:
        if limit_weights is not None:
            raise WeightError("limit_weights without limits; give both, or limits alone")
        return None
    if limit_weights is None:
        return np.ones(n_local, np.int64)
    return one_a_cell(limit_weights, "limit_weights", n_local)


def _one_a_part(limits: ArrayLike, n_parts: int) -> FloatArray:
    """Return the limit of each part."""
    most = np.asarray(limits, np.float64)
    if most.shape not in ((), (1,), (n_parts,)):
        raise WeightError(
            f"limits has shape {most.shape}; wanted one number, or one for each of the "
            f"{n_parts} parts"
        )
    return np.broadcast_to(most, (n_parts,))


def one_a_cell(values: ArrayLike, what: str, n_local: int) -> Array:
    """Return an array with one number a cell."""
    array = np.asarray(values)
    if array.shape != (n_local,):
        raise WeightError(
            f"{what} has shape {array.shape}; wanted one number for each of the {n_local} cells"
        )
    return array


def refuse_differences(given: LocalWish, numbered: bool, method: str, comm: Comm) -> None:
    """Raise on all ranks if some rank wants something else than rank 0."""
    flags = {name: getattr(given, name) is not None for name in ("weight", "limit_weight", "group")}
    limit = np.empty(0) if given.part_limit is None else given.part_limit
    shared = zlib.crc32(np.concatenate([given.part_speed, limit]).tobytes())
    spelled = (
        f"{given.centers.shape[1]} axes, {given.n_parts} parts, levels {given.level_sizes}, "
        f"{flags}, cell_gid {numbered}, method {method!r}, speeds and limits {shared:08x}"
    )
    first = str(comm.bcast_object(spelled))
    error = None
    if spelled != first:
        error = InputError(
            f"rank {comm.rank} and rank 0 ask for different splits ({spelled[:200]} | "
            f"{first[:200]}); wanted the same options on all ranks"
        )
    comm.check(error)


def _no_graph() -> CellGraph:
    """Say that there is no cell graph."""
    raise InputError("split_local has no cell graph; use a method that needs none")
