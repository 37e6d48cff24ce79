"""Split along a curve: contiguous, weighted chunks of the curve order with least bottleneck.

The order of the cells is that of `sfcpart.curve`; the chunks are those of `methods.curve.chunks`.
With nested levels the curve is first divided among the parts of the first level, each with the
summed speed and limit of what it contains and with one item at least for each of its smallest
parts, and each chunk then again. That gives the least bottleneck, and `tolerance` plays no role,
unless `cuts` is "least": then the cuts move within the tolerance to where they cut fewest faces
(`methods.curve.window_cuts`).
"""

from __future__ import annotations

from functools import partial
from typing import cast

import numpy as np

from sfcpart.curve import Curve
from sfcpart.dtypes import PART, Int32Array, Int64Array
from sfcpart.errors import InputError, PartitionError, WeightError
from sfcpart.methods.curve.abreast import Asking, answered
from sfcpart.methods.curve.chunks import cutting
from sfcpart.methods.curve.line import Line
from sfcpart.methods.curve.window_cuts import with_least_cuts
from sfcpart.methods.problem import Problem
from sfcpart.methods.together import Bundles

__all__ = ["along_hilbert", "along_morton", "along_rows", "split_along", "unfit"]


def split_along(problem: Problem, *, curve: Curve) -> Int32Array:
    """Return the part of each local cell: chunks of the curve with least bottleneck.

    Or with few faces cut, if the problem asks for it.

    Parameters
    ----------
    problem : Problem
    curve : {"hilbert", "morton", "rows"}

    Returns
    -------
    (n_local,) int32
        The same for any number of ranks and threads. A part is empty only if there are fewer
        cells than parts.

    Raises
    ------
    InputError
        If a centre is not finite.
    WeightError
        If there is not one positive speed for each part.
    PartitionError
        If limits cannot be kept, a group or cell is too heavy for every part, or groups leave
        fewer items than parts.

    Notes
    -----
    O(n) for keys and order, O(P log n log w_max) for the chunks; see `methods.curve.window_cuts`
    for the least cut, for which every rank gathers the whole problem.
    """
    part = _balanced(problem, curve=curve)
    return part if problem.cuts == "balanced" else with_least_cuts(problem, part, curve=curve)


def _balanced(problem: Problem, *, curve: Curve) -> Int32Array:
    """Return the chunks with least bottleneck."""
    problem.comm.check(unfit(problem))
    place = problem.place(problem.centers, curve=curve, comm=problem.comm)
    weight = None if problem.weight is None else place.gather(problem.weight)
    limited = None if problem.limit_weight is None else place.gather(problem.limit_weight)
    if problem.group is None:
        return cast(Int32Array, place.scatter(_parts(problem, len(place), weight, limited)))
    bundles = Bundles.of(
        place.gather(problem.group), weight=weight, limit_weight=limited, comm=problem.comm
    )
    problem.comm.check(_too_heavy(problem, bundles))
    n_items = len(bundles.name)
    item_part = _parts(problem, n_items, bundles.weight, bundles.limit_weight)
    return cast(Int32Array, place.scatter(bundles.spread(item_part)))


along_hilbert = partial(split_along, curve="hilbert")
along_morton = partial(split_along, curve="morton")
along_rows = partial(split_along, curve="rows")


def _parts(
    problem: Problem, n_items: int, weight: Int64Array | None, limited: Int64Array | None
) -> Int32Array:
    """Return the part of each item of this rank's stretch."""
    sizes = problem.level_sizes or (problem.n_parts,)
    total = int(problem.comm.allreduce(np.array([n_items], np.int64))[0])
    limit = _bounded_limit(problem, limited)
    if total < problem.n_parts:
        limited, limit = _one_item_a_part(problem, n_items, limited, limit)
    line = Line.of(
        n_items,
        weight=weight,
        limit_weight=limited,
        reach=problem.n_parts // sizes[0] + 1,
        comm=problem.comm,
        limit_unit=problem.limit_unit,
    )
    cut = _nested_cuts(problem, line, sizes, limit)
    bounded = np.clip(cut, line.first, line.last)
    return np.repeat(np.arange(problem.n_parts, dtype=PART), np.diff(bounded))


def _bounded_limit(problem: Problem, limited: Int64Array | None) -> Int64Array | None:
    """Return the limits, none above the sum of all cells, so that their sums cannot overflow."""
    if limited is None or problem.part_limit is None:
        return None
    whole = int(problem.comm.allreduce(limited.sum(keepdims=True))[0])
    return np.minimum(problem.part_limit, whole).astype(np.int64)


def _one_item_a_part(
    problem: Problem, n_items: int, limited: Int64Array | None, limit: Int64Array | None
) -> tuple[Int64Array, Int64Array]:
    """Let no part take two items where some must stay empty: by a limit that two items break.

    With U the sum of the limited weight and 1, an item counts U more and a part may hold U more.
    """
    n_cells = int(problem.comm.allreduce(np.array([len(problem.centers)], np.int64))[0])
    if n_cells >= problem.n_parts:
        raise PartitionError(
            f"groups leave fewer items than the {problem.n_parts} parts; "
            "ask for fewer parts or smaller groups"
        )
    if limited is None or limit is None:
        return np.ones(n_items, np.int64), np.ones(problem.n_parts, np.int64)
    more = int(problem.comm.allreduce(limited.sum(keepdims=True))[0]) + 1
    return limited + more, limit + more


def _nested_cuts(
    problem: Problem, line: Line, sizes: tuple[int, ...], part_limit: Int64Array | None
) -> Int64Array:
    """Divide the line level by level; return the cuts of the smallest parts, (n_parts + 1,)."""
    some_for_each = line.n_items >= problem.n_parts
    cut = np.array([0, line.n_items], np.int64)
    n_chunks = 1
    for size in sizes:
        n_chunks *= size
        inside = problem.n_parts // n_chunks
        speed = problem.part_speed.astype(np.float64).reshape(n_chunks, inside).sum(axis=1)
        limit = None if part_limit is None else _summed(part_limit, n_chunks)
        least = inside if some_for_each else 0
        tasks = []
        for chunk in range(len(cut) - 1):
            own = slice(chunk * size, (chunk + 1) * size)
            ends = {"begin": int(cut[chunk]), "end": int(cut[chunk + 1])}
            most = None if limit is None else limit[own]
            task = cutting(line, **ends, speed=speed[own], limit=most, least=least)
            tasks.append(task if n_chunks == size else _inside(chunk, task))
        pieces = answered(line.comm, tasks)
        cut = np.append(np.concatenate([piece[:-1] for piece in pieces]), line.n_items)
    return cut


def _inside(chunk: int, task: Asking[Int64Array]) -> Asking[Int64Array]:
    """Run a task; say in which chunk it fails."""
    try:
        return (yield from task)
    except PartitionError as error:
        raise PartitionError(f"inside chunk {chunk} of the level above, {error}") from error


def _summed(limit: Int64Array, n_chunks: int) -> Int64Array:
    """Return the limits of chunks of parts, none above half of what an int64 holds."""
    sums = [min(sum(map(int, row)), 1 << 62) for row in limit.reshape(n_chunks, -1)]
    return np.array(sums, np.int64)


def unfit(problem: Problem) -> InputError | None:
    """Return an error if speeds, levels or single cells do not fit the parts."""
    if problem.n_parts < 1:
        return PartitionError(f"{problem.n_parts} parts; wanted at least 1")
    if len(problem.part_speed) != problem.n_parts:
        return WeightError(f"{len(problem.part_speed)} speeds for {problem.n_parts} parts")
    if not np.all(np.isfinite(problem.part_speed) & (problem.part_speed > 0)):
        bad = int(np.flatnonzero(~(problem.part_speed > 0) | ~np.isfinite(problem.part_speed))[0])
        return WeightError(
            f"part {bad} has speed {problem.part_speed[bad]}; wanted finite numbers above 0"
        )
    if problem.level_sizes and int(np.prod(problem.level_sizes)) != problem.n_parts:
        spelled = "x".join(map(str, problem.level_sizes))
        return PartitionError(f"levels {spelled} do not multiply to {problem.n_parts} parts")
    if problem.limit_weight is None or problem.part_limit is None or not len(problem.limit_weight):
        return None
    heaviest = int(np.argmax(problem.limit_weight))
    need, most = int(problem.limit_weight[heaviest]), int(problem.part_limit.max())
    if need <= most:
        return None
    return PartitionError(
        f"cell {problem.first_gid + heaviest} alone needs {need * problem.limit_unit:.10g}, but no "
        f"part may hold more than {most * problem.limit_unit:.10g}; raise the limit"
    )


def _too_heavy(problem: Problem, bundles: Bundles) -> PartitionError | None:
    """Return an error that names a group whose limited weight no part may hold."""
    if bundles.limit_weight is None or problem.part_limit is None or not len(bundles.name):
        return None
    heaviest = int(np.argmax(bundles.limit_weight))
    need, most = int(bundles.limit_weight[heaviest]), int(problem.part_limit.max())
    if need <= most:
        return None
    return PartitionError(
        f"group {int(bundles.name[heaviest])} needs {need * problem.limit_unit:.10g}, but no part "
        f"may hold more than {most * problem.limit_unit:.10g}; raise the limit or make the group "
        "smaller"
    )
