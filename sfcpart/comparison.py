"""Several ways to split one mesh, measured alike, side by side."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.errors import InputError, SfcpartError
from sfcpart.graph import CellGraph
from sfcpart.measure.columns import TOTAL_COLUMNS, Column
from sfcpart.meter import metered
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS
from sfcpart.partition import Partition

if TYPE_CHECKING:
    from sfcpart.measure import Assessment

__all__ = ["COMPARED_COLUMNS", "ComparedSplit", "Comparison", "compare_methods"]

_WARM_CELLS = 1_000

COMPARED_COLUMNS: tuple[Column, ...] = (
    Column(
        "split_seconds",
        "split",
        "s",
        "Time to split; with the cell graph if it needs one.",
        "lower",
    ),
    Column(
        "peak_bytes", "memory", "bytes", "Memory the split needed beyond mesh and graph.", "lower"
    ),
    Column(
        "run_seconds",
        "run",
        "s",
        "Predicted time of the whole run: time to split + steps x predicted step.",
        "lower",
        needs_faces=True,
    ),
    *TOTAL_COLUMNS,
)
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
        None for a partition from elsewhere.
    peak_bytes : int or None
    failure : str
        Why there is no partition; empty if there is one.
    """

    name: str
    partition: Partition | None = None
    assessment: Assessment | None = None
    split_seconds: float | None = None
    peak_bytes: int | None = None
    failure: str = ""


@dataclass(frozen=True, eq=False)
class Comparison:
    """Rows in the order asked for.

    Attributes
    ----------
    rows : tuple of ComparedSplit
    steps : int
        Length of the run behind `run_seconds`.
    graph_seconds : float
        Time to build the cell graph, shared by all rows; part of `split_seconds` of the methods
        that need it.
    """

    rows: tuple[ComparedSplit, ...]
    steps: int
    graph_seconds: float

    def figures(self) -> Iterator[dict[str, Any]]:
        """Yield name and figures of each row; None where a figure is unknown."""
        for row in self.rows:
            known: Mapping[str, Any] = {} if row.assessment is None else row.assessment.total
            step = known.get("step_seconds")
            run = None if step is None else (row.split_seconds or 0.0) + self.steps * step
            own = {
                "split_seconds": row.split_seconds,
                "peak_bytes": row.peak_bytes,
                "run_seconds": run,
            }
            yield {
                "name": row.name,
                **{column.name: {**known, **own}.get(column.name) for column in COMPARED_COLUMNS},
            }

    def best(self) -> dict[str, list[int]]:
        """Return for each figure that has a better end the rows that reach it (all, if tied)."""
        table = list(self.figures())
        found: dict[str, list[int]] = {}
        for column in COMPARED_COLUMNS:
            values = {k: row[column.name] for k, row in enumerate(table)}
            values = {k: v for k, v in values.items() if v is not None and np.isfinite(v)}
            if not column.better or len(values) < 2:
                continue
            pick = min if column.better == "lower" else max
            edge = pick(values.values())
            found[column.name] = [k for k, value in values.items() if value == edge]
        return found

    def to_json_dict(self) -> dict[str, Any]:
        """Return all rows with all figures, stable keys."""
        rows = [
            {**figures, "failure": row.failure or None}
            for row, figures in zip(self.rows, self.figures(), strict=True)
        ]
        best = {name: [self.rows[k].name for k in rows_of] for name, rows_of in self.best().items()}
        return {
            "steps": self.steps,
            "graph_seconds": self.graph_seconds,
            "rows": rows,
            "best": best,
        }


def compare_methods(
    problem: Problem,
    *,
    methods: Sequence[str] | None,
    given: Mapping[str, Partition],
    steps: int,
    measure: Callable[[Partition], Assessment],
) -> Comparison:
    """Run methods on one problem and measure their partitions, and given ones, alike."""
    names = _known(methods)
    clash = [name for name in given if name in names]
    if clash:
        raise InputError(f"a given partition is named {clash[0]!r} like a method; rename it")
    if isinstance(steps, bool) or not isinstance(steps, int | np.integer) or steps < 1:
        raise InputError(f"steps is {steps!r}; wanted a whole number, 1 or more")
    _, graph_seconds, _ = metered(problem.graph)
    rows = [_run(name, problem, graph_seconds=graph_seconds) for name in names]
    rows += [ComparedSplit(name, partition=partition) for name, partition in given.items()]
    measured = (
        row if row.partition is None else replace(row, assessment=measure(row.partition))
        for row in rows
    )
    return Comparison(rows=tuple(measured), steps=int(steps), graph_seconds=graph_seconds)


def _known(methods: Sequence[str] | None) -> list[str]:
    """Return known methods, each once; all by default."""
    names = list(METHODS) if methods is None else list(methods)
    unknown = [name for name in names if name not in METHODS]
    if unknown:
        raise InputError(f"method {unknown[0]!r} is unknown; wanted some of {', '.join(METHODS)}")
    if len(set(names)) < len(names):
        raise InputError(f"a method is named twice: {', '.join(names)}; name each once")
    return names


def _run(name: str, problem: Problem, *, graph_seconds: float) -> ComparedSplit:
    """Run one method on a problem and measure it; a refusal becomes a row that says why."""
    method = METHODS[name]
    try:
        _warm_up(name, problem)
        cell_part, seconds, peak = metered(lambda: method.run(problem))
    except SfcpartError as error:
        return ComparedSplit(name, failure=str(error))
    return ComparedSplit(
        name,
        partition=Partition.from_array(cell_part, problem.n_parts),
        split_seconds=seconds + (graph_seconds if method.needs_graph else 0.0),
        peak_bytes=peak,
    )


def _warm_up(name: str, problem: Problem) -> None:
    """Load (or compile) what a method needs on the first few cells, so that it is not timed."""
    n = min(_WARM_CELLS, len(problem.centers))
    n_parts = min(problem.n_parts, max(1, n // 8))
    graph = problem.graph() if METHODS[name].needs_graph else None
    small = replace(
        problem,
        centers=problem.centers[:n],
        n_parts=n_parts,
        part_speed=problem.part_speed[:n_parts],
        level_sizes=(n_parts,),
        graph=lambda: _first_cells(graph, n) if graph is not None else problem.graph(),
        weight=None if problem.weight is None else problem.weight[:n],
        limit_weight=None,
        part_limit=None,
        group=None,
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
