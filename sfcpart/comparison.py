"""Several ways to split one mesh, measured alike, side by side.

Each method runs alone, after a run on a few cells that loads what it needs; what is compiled is
never timed. Methods that use the cell graph are charged its time, whether or not it was there.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from math import isfinite
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.curve import curve_slice
from sfcpart.errors import InputError, SfcpartError
from sfcpart.graph import CellGraph
from sfcpart.measure.columns import RUN_COLUMNS, TOTAL_COLUMNS, Column
from sfcpart.meter import Metered, metered
from sfcpart.methods.on_one_rank import run_method
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS
from sfcpart.partition import Partition
from sfcpart.slices.gate import agreed

if TYPE_CHECKING:
    from sfcpart.measure import Assessment

__all__ = ["COMPARED_COLUMNS", "ComparedSplit", "Comparison", "compare_methods"]

_WARM_CELLS = 2_000

COMPARED_COLUMNS: tuple[Column, ...] = (*RUN_COLUMNS, *TOTAL_COLUMNS)
"""Every figure of a row, in table order."""


@dataclass(frozen=True, eq=False)
class ComparedSplit:
    """One row: a way to split and what came of it.

    Attributes
    ----------
    name : str
        Method, or the name given to a partition from elsewhere.
    partition : Partition or None
    assessment : Assessment or None
    split_seconds : float or None
        With the cell graph if the method needs it; None for a partition from elsewhere.
    graph_seconds : float or None
        What of it went into the cell graph.
    peak_bytes : int or None
        Beyond mesh and graph; None where the system cannot tell.
    failure : str
        Why there is no partition; empty if there is one.
    """

    name: str
    partition: Partition | None = None
    assessment: Assessment | None = None
    split_seconds: float | None = None
    graph_seconds: float | None = None
    peak_bytes: int | None = None
    failure: str = ""

    def figures(self, steps: int) -> dict[str, Any]:
        """Return the value of each of `COMPARED_COLUMNS`, None where it is unknown."""
        known: dict[str, Any] = {} if self.assessment is None else dict(self.assessment.total)
        step = known.get("step_seconds")
        known["split_seconds"] = self.split_seconds
        known["graph_seconds"] = self.graph_seconds
        known["peak_bytes"] = self.peak_bytes
        known["run_seconds"] = None if step is None else (self.split_seconds or 0.0) + steps * step
        return {column.name: _plain(known.get(column.name)) for column in COMPARED_COLUMNS}


@dataclass(frozen=True, eq=False)
class Comparison:
    """Rows in the order asked for, partitions from elsewhere last.

    Attributes
    ----------
    rows : tuple of ComparedSplit
    steps : int
        Length of the run behind `run_seconds`.
    graph_seconds : float or None
        Time to build the cell graph, part of `split_seconds` of the methods that need it; None if
        the mesh is known by its centres only.
    graph_bytes : int or None
        Memory that took.
    """

    rows: tuple[ComparedSplit, ...]
    steps: int
    graph_seconds: float | None
    graph_bytes: int | None = None

    def figures(self) -> Iterator[dict[str, Any]]:
        """Yield name and figures of each row; None where a figure is unknown."""
        for row in self.rows:
            yield {"name": row.name, **row.figures(self.steps)}

    def best(self) -> dict[str, list[int]]:
        """Return for each figure that has a better end the rows that reach it (all, if tied).

        Figures that fewer than two rows have are left out.
        """
        table = list(self.figures())
        found: dict[str, list[int]] = {}
        for column in COMPARED_COLUMNS:
            values = {k: row[column.name] for k, row in enumerate(table)}
            values = {k: value for k, value in values.items() if value is not None}
            if not column.better or len(values) < 2:
                continue
            edge = (min if column.better == "lower" else max)(values.values())
            found[column.name] = [k for k, value in values.items() if value == edge]
        return found

    def to_json_dict(self) -> dict[str, Any]:
        """Return all rows with all figures as plain Python values, stable keys, strict JSON."""
        rows = [
            {**figures, "failure": row.failure or None}
            for row, figures in zip(self.rows, self.figures(), strict=True)
        ]
        best = {name: [self.rows[k].name for k in rows_of] for name, rows_of in self.best().items()}
        return {
            "steps": self.steps,
            "graph_seconds": self.graph_seconds,
            "graph_bytes": self.graph_bytes,
            "rows": rows,
            "best": best,
        }


def compare_methods(
    problem: Problem,
    *,
    methods: Sequence[str] | None,
    given: Mapping[str, Partition],
    steps: int,
    repeat: int,
    time_graph: Callable[[int], Metered | None],
    measure: Callable[[Partition], Assessment],
    progress: Callable[[int], None] = lambda done: None,
) -> Comparison:
    """Run methods on one problem and measure their partitions, and given ones, alike.

    Parameters
    ----------
    problem : Problem
    methods, given, steps, repeat
        As for `sfcpart.compare`.
    time_graph : callable
        Builds the cell graph a number of times and returns what that took; None if there is none.
    measure : callable
        Assesses a partition.
    progress : callable
        Called with the number of methods done.
    """
    names = _known(methods)
    steps, repeat = _whole(steps, "steps"), _whole(repeat, "repeat")
    problem = replace(problem, place=curve_slice)  # each method finds the curve anew, and is timed
    others = agreed(
        problem.comm,
        lambda: [_given_row(name, given[name], problem, taken=names) for name in given],
    )
    graph = time_graph(repeat)
    rows = []
    for name in names:
        rows.append(_run(name, problem, repeat=repeat, graph=graph))
        progress(len(rows))
    measured = (
        row if row.partition is None else replace(row, assessment=measure(row.partition))
        for row in rows + others
    )
    return Comparison(
        rows=tuple(measured),
        steps=steps,
        graph_seconds=None if graph is None else graph.seconds,
        graph_bytes=None if graph is None else graph.peak_bytes,
    )


def _known(methods: Sequence[str] | None) -> list[str]:
    """Return known methods, each once; all by default."""
    names = list(METHODS) if methods is None else list(methods)
    unknown = [name for name in names if name not in METHODS]
    if unknown:
        raise InputError(f"method {unknown[0]!r} is unknown; wanted some of {', '.join(METHODS)}")
    if len(set(names)) < len(names):
        raise InputError(f"a method is named twice: {', '.join(names)}; name each once")
    return names


def _whole(value: object, name: str) -> int:
    """Return a whole number of at least 1."""
    if isinstance(value, bool) or not isinstance(value, int | np.integer) or value < 1:
        raise InputError(f"{name} is {value!r}; wanted a whole number, 1 or more")
    return int(value)


def _given_row(
    name: str, partition: Partition, problem: Problem, *, taken: Sequence[str]
) -> ComparedSplit:
    """Check a partition from elsewhere before any time is spent; empty last parts are parts."""
    n_cells, n_parts = len(problem.centers), problem.n_parts
    if name in taken:
        raise InputError(f"a given partition is named {name!r} like a method; rename it")
    if partition.n_cells != n_cells:
        raise InputError(
            f"the given partition {name!r} has {partition.n_cells} cells, the mesh {n_cells}; "
            "wanted the same"
        )
    if partition.n_parts > n_parts:
        raise InputError(
            f"the given partition {name!r} has {partition.n_parts} parts; the comparison is of "
            f"{n_parts}: compare into {partition.n_parts} parts"
        )
    return ComparedSplit(name, partition=Partition.from_array(partition.cell_part, n_parts))


def _run(name: str, problem: Problem, *, repeat: int, graph: Metered | None) -> ComparedSplit:
    """Run one method on a problem and measure it; a refusal becomes a row that says why."""
    method = METHODS[name]
    try:
        _warm_up(name, problem)
        cell_part, took = metered(
            lambda: run_method(method, problem), repeat=repeat, comm=problem.comm
        )
        partition = Partition.from_array(cell_part, problem.n_parts)
    except SfcpartError as error:
        return ComparedSplit(name, failure=str(error))
    for_graph = graph.seconds if graph is not None and method.uses_graph(problem) else 0.0
    return ComparedSplit(
        name,
        partition=partition,
        split_seconds=took.seconds + for_graph,
        graph_seconds=for_graph,
        peak_bytes=took.peak_bytes,
    )


def _warm_up(name: str, problem: Problem) -> None:
    """Load what a method needs, on the first cells here alone.

    A run that compiles is timed a second time.
    """
    n = min(_WARM_CELLS, len(problem.centers))
    n_parts = min(problem.n_parts, max(1, n // 8))
    graph = _first_cells(problem.graph(), n) if METHODS[name].uses_graph(problem) else None
    if not n:
        return
    small = replace(
        problem,
        comm=SerialComm(),
        first_gid=0,
        centers=problem.centers[:n],
        n_parts=n_parts,
        part_speed=problem.part_speed[:n_parts],
        level_sizes=(n_parts,),
        graph=problem.graph if graph is None else lambda: graph,
        weight=None if problem.weight is None else problem.weight[:n],
        limit_weight=None if problem.limit_weight is None else problem.limit_weight[:n],
        part_limit=None if problem.part_limit is None else problem.part_limit[:n_parts],
        group=None if problem.group is None else problem.group[:n],
    )
    try:
        METHODS[name].run(small)
    except SfcpartError:
        return  # such as weights that are all zero among the first cells


def _first_cells(graph: CellGraph, n: int) -> CellGraph:
    """Cut the graph down to its first `n` cells."""
    end = int(graph.indptr[n])
    keep = graph.indices[:end] < n
    row = np.repeat(np.arange(n), np.diff(graph.indptr[: n + 1]))[keep]
    indptr = np.concatenate(([0], np.cumsum(np.bincount(row, minlength=n)))).astype(np.int64)
    return CellGraph(
        indptr=indptr,
        indices=graph.indices[:end][keep],
        data=graph.data[:end][keep],
        boundary_count=graph.boundary_count[:n],
        boundary_measure=graph.boundary_measure[:n],
    )


def _plain(value: Any) -> Any:
    """Replace what is not a finite number by None."""
    return None if value is None or not isfinite(value) else value
