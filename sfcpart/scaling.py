"""How far a run will scale: one curve order, many part counts, the model of a step for each.

Strong scaling: the mesh cut into more and more parts along the same curve order; each count costs
its cuts along the curve and one pass over the cell graph. Weak scaling: with the cells a part of
one count kept, the first P parts along the curve are a compact region of a mesh P times as large
as a part; what they exchange among themselves is known from the pairs of that one count.

The model is that of `sfcpart.measure.step_model`; what it leaves out, a forecast leaves out.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import asdict, dataclass, replace
from math import isfinite
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array, IntArray
from sfcpart.errors import InputError, MeshError
from sfcpart.graph import CellGraph, cell_graph
from sfcpart.kernels.measure import count_cuts
from sfcpart.kernels.threads import run_ranges
from sfcpart.measure.columns import Column
from sfcpart.measure.gate import cast_graph, frozen
from sfcpart.measure.pairs import PartPairs
from sfcpart.measure.step_model import StepModel, StepTime
from sfcpart.plan import Weights, plan_problem, weights_of

if TYPE_CHECKING:
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.methods.problem import Problem

__all__ = [
    "FORECAST_COLUMNS",
    "MEMORY_A_CELL",
    "Forecast",
    "Rung",
    "WeakRung",
    "forecast",
    "ladder",
]

MEMORY_A_CELL = 1000.0
"""Bytes a solver keeps for each cell by default: 125 float64 of geometry, fields and matrix (common
practice, no source)."""

FORECAST_COLUMNS: tuple[Column, ...] = (
    Column("n_parts", "parts", "parts", "Number of parts, one a rank.", is_whole=True),
    Column("cells_max", "cells", "cells", "Most cells of one part.", is_whole=True),
    Column("step_seconds", "step", "s", "Predicted time of one step: that of the slowest part."),
    Column("speed_up", "speed-up", "", "Against one rank."),
    Column("efficiency", "efficiency", "", "Speed-up over the number of parts: 1 is perfect."),
    Column("exchange_share", "messages", "", "Share of the slowest part's step that is messages."),
    Column("imbalance", "imbalance", "", "Largest load - 1."),
    Column("halo_share", "halo", "", "Halo cells of all parts over all cells."),
    Column("neighbours_max", "neighbours", "parts", "Most neighbours of a part.", is_whole=True),
    Column("memory_bytes", "memory", "bytes", "Of the part with most owned and halo cells."),
)
"""Figures of each count, in table order."""


@dataclass(frozen=True)
class Rung:
    """One count of parts; the attributes are those of `FORECAST_COLUMNS`."""

    n_parts: int
    cells_max: int
    step_seconds: float
    speed_up: float
    efficiency: float
    exchange_share: float
    imbalance: float
    halo_share: float
    neighbours_max: int
    memory_bytes: float


@dataclass(frozen=True)
class WeakRung:
    """A mesh that grows with its parts: number of parts, predicted step, efficiency."""

    n_parts: int
    step_seconds: float
    efficiency: float


@dataclass(frozen=True, eq=False)
class Forecast:
    """How step time and efficiency go with the number of parts.

    Attributes
    ----------
    rungs : tuple of Rung
        Strong scaling, by number of parts.
    weak : tuple of WeakRung
        Weak scaling at `cells_a_part`.
    cells_a_part : float
        Mean cells of a part of the count behind `weak`: `best`, or the smallest count.
    keep : float
        Efficiency wished for.
    best : int or None
        Largest count that keeps it; None if none does.
    n_cells : int
    memory_a_cell : float
    step_model : StepModel
    """

    rungs: tuple[Rung, ...]
    weak: tuple[WeakRung, ...]
    cells_a_part: float
    keep: float
    best: int | None
    n_cells: int
    memory_a_cell: float
    step_model: StepModel

    def figures(self) -> Iterator[dict[str, Any]]:
        """Yield the figures of each count."""
        for rung in self.rungs:
            yield asdict(rung)

    def to_json_dict(self) -> dict[str, Any]:
        """Return everything as plain Python values, stable keys, strict JSON."""
        return {
            "n_cells": self.n_cells,
            "keep": self.keep,
            "best": self.best,
            "rungs": list(self.figures()),
            "weak": [asdict(rung) for rung in self.weak],
            "cells_a_part": self.cells_a_part,
            "memory_a_cell": self.memory_a_cell,
            "step_model": self.step_model.to_json_dict(),
        }


def ladder(first: int, last: int, *, rungs: int | None = None) -> list[int]:
    """Return part counts from first to last: doubled each time, or so many in equal ratios.

    Parameters
    ----------
    first, last : int
        1 <= first <= last.
    rungs : int, optional
        How many, at most; equal ones after rounding are named once.

    Raises
    ------
    InputError
        If the ends or the number of rungs make no ladder.

    Examples
    --------
    >>> ladder(16, 100), ladder(10, 1000, rungs=5)
    ([16, 32, 64, 100], [10, 32, 100, 316, 1000])
    """
    if not 1 <= first <= last:
        raise InputError(f"parts go from {first} to {last}; wanted 1 <= first <= last")
    if rungs is None:
        counts = [first]
        while counts[-1] * 2 < last:
            counts.append(counts[-1] * 2)
        return [*counts, last] if last > first else counts
    if rungs < 1:
        raise InputError(f"{rungs} rungs of a ladder; wanted 1 or more")
    return sorted({round(count) for count in np.geomspace(first, last, rungs).tolist()})


def forecast(
    mesh: Mesh,
    n_parts: Sequence[int],
    *,
    keep: float = 0.8,
    weights: Weights = None,
    step_model: StepModel | None = None,
    memory_a_cell: float = MEMORY_A_CELL,
    progress: Callable[[int], None] = lambda done: None,
) -> Forecast:
    """Predict how far a run on a mesh will scale, along one Hilbert order of its cells.

    Parameters
    ----------
    mesh : Mesh
        With faces: without them nothing is known about messages.
    n_parts : sequence of int
        Counts of parts, 1 <= each <= n_cells (see `ladder`).
    keep : float
        Efficiency wished for, above 0 and at most 1.
    weights : optional
        As for `split`.
    step_model : StepModel, optional
        What a step costs; with measured numbers of your solver and network the forecast is worth
        more.
    memory_a_cell : float
        Bytes that the solver keeps for each cell, halo cells included.
    progress : callable
        Called with the number of counts done.

    Returns
    -------
    Forecast
        Strong scaling for each count, weak scaling at the cells a part of the best one.

    Raises
    ------
    InputError, MeshError, PartitionError, WeightError
        If a count, share or weight is out of range, or the mesh has no faces.

    Notes
    -----
    One sort of the curve keys and one cell graph, whatever the number of counts; each count then
    costs O(n_cells + entries of the graph), without a sort of cells. The model leaves out what
    `StepModel.to_json_dict()["leaves_out"]` lists: a forecast is a ranking and an order of
    magnitude, no promise.

    Examples
    --------
    >>> from sfcpart.mesh.shapes import lattice
    >>> found = forecast(lattice((16, 16)).to_mesh(), [1, 4, 16], keep=0.5)
    >>> [rung.cells_max for rung in found.rungs], found.rungs[0].efficiency
    ([256, 64, 16], 1.0)
    """
    counts = _counts(n_parts)
    if mesh.points is None and mesh.faces is None:
        raise MeshError(
            "the mesh is given by its cell centres, without faces: what parts exchange is not "
            "known; read it with its points, or give its faces"
        )
    _check_share(keep)
    if not isfinite(memory_a_cell) or memory_a_cell < 0:
        raise InputError(f"memory_a_cell is {memory_a_cell}; wanted a finite number >= 0")
    model = StepModel() if step_model is None else step_model
    problem = _planned(mesh, counts[-1], weights)
    line = _CurveRows.of(cast_graph(cell_graph(mesh)), problem, weights_of(mesh, weights))
    cuts = []
    for count in counts:
        cuts.append(_cut(problem, line, count))
        progress(len(cuts))
    rungs = tuple(_rung(cut, model, memory_a_cell) for cut in cuts)
    keeping = [k for k, rung in enumerate(rungs) if rung.efficiency >= keep]
    shown = cuts[keeping[-1]] if keeping else cuts[0]
    return Forecast(
        rungs=rungs,
        weak=_weak(shown, model),
        cells_a_part=mesh.n_cells / shown.n_parts,
        keep=float(keep),
        best=rungs[keeping[-1]].n_parts if keeping else None,
        n_cells=mesh.n_cells,
        memory_a_cell=float(memory_a_cell),
        step_model=model,
    )


def _counts(n_parts: Sequence[int]) -> list[int]:
    """Return the counts in order, each once."""
    counts = list(n_parts)
    if not counts:
        raise InputError("no count of parts to forecast; wanted one or more")
    for count in counts:
        if isinstance(count, bool) or not isinstance(count, int | np.integer) or count < 1:
            raise InputError(f"a count of parts is {count!r}; wanted whole numbers, 1 or more")
    return sorted({int(count) for count in counts})


def _check_share(keep: float) -> None:
    """Refuse efficiencies that nothing can keep, or everything keeps."""
    if not isfinite(keep) or not 0 < keep <= 1:
        raise InputError(f"the efficiency to keep is {keep}; wanted above 0 and at most 1")


def _planned(mesh: Mesh, n_parts: int, weights: Weights) -> Problem:
    """Check what was asked at the largest count."""
    return plan_problem(
        mesh,
        n_parts,
        tolerance=0.0,
        weights=weights,
        speeds=None,
        limit_weights=None,
        limits=None,
        levels=None,
        together=None,
        pairs=None,
        periodic=(),
        face_weight="count",
        seed=0,
        comm=SerialComm(),
    )


@dataclass(frozen=True, eq=False)
class _Cut:
    """One count: cells and work of each part, and who exchanges how many cells."""

    cells: Int64Array
    work: FloatArray
    pairs: PartPairs

    @property
    def n_parts(self) -> int:
        """Number of parts."""
        return len(self.cells)

    def first(self, count: int) -> _Cut:
        """Return the first parts along the curve, as if there were no others."""
        here = (self.pairs.part < count) & (self.pairs.neighbour < count)
        pairs = PartPairs(*(column[here] for column in vars(self.pairs).values()))
        return _Cut(self.cells[:count], self.work[:count], pairs)

    def predicted(self, model: StepModel) -> StepTime:
        """Predict a step."""
        speed = np.ones(self.n_parts)
        return model.predict(self.work, self.pairs, speed=speed, n_cells=int(self.cells.sum()))


@dataclass(frozen=True, eq=False)
class _CurveRows:
    """The cell graph in curve order: neighbours are near in memory, and each count costs half.

    `order` are the cells in curve order, `work` the weight of each of those, None for 1 each.
    """

    order: IntArray
    indptr: Int64Array
    indices: Int32Array
    work: FloatArray | None
    no_measure: FloatArray

    @classmethod
    def of(cls, graph: CellGraph, problem: Problem, work: Array | None) -> _CurveRows:
        """Renumber rows and entries."""
        curve = problem.place(problem.centers, curve="hilbert", comm=problem.comm)
        place = np.asarray(curve.position, np.int32)
        order = np.empty_like(place)
        order[place] = np.arange(len(place), dtype=np.int32)
        count = np.diff(graph.indptr)[order]
        indptr = np.zeros(len(order) + 1, np.int64)
        np.cumsum(count, out=indptr[1:])
        entry = np.arange(indptr[-1]) + np.repeat(graph.indptr[:-1][order] - indptr[:-1], count)
        ordered = None if work is None else np.asarray(work, np.float64)[order]
        return cls(order, indptr, place[graph.indices[entry]], ordered, np.zeros(len(entry)))

    def pairs(self, part: Int32Array, n_parts: int) -> PartPairs:
        """Find which parts exchange how many cells; `part` is in curve order."""
        n = len(part)
        cut_count, unused = np.empty(n, np.int32), np.empty(n)
        rows = (self.indptr, self.indices, self.no_measure)
        run_ranges(count_cuts, n, *rows, part, cut_count, unused)
        part_cut = np.bincount(part, cut_count, n_parts).astype(np.int64)
        return PartPairs.from_cuts(
            cut_count, part_cut, indptr=self.indptr, indices=self.indices, cell_part=part
        )


def _cut(problem: Problem, line: _CurveRows, n_parts: int) -> _Cut:
    """Cut the curve order, which the mesh keeps, and find what the parts exchange."""
    from sfcpart.methods.registry import METHODS

    one = replace(problem, n_parts=n_parts, part_speed=np.ones(n_parts), level_sizes=(n_parts,))
    part = frozen(METHODS["hilbert"].run(one)[line.order])
    cells = np.bincount(part, minlength=n_parts).astype(np.int64)
    work: FloatArray = cells.astype(np.float64)
    if line.work is not None:
        work = np.bincount(part, line.work, n_parts).astype(np.float64)
    return _Cut(cells, work, line.pairs(part, n_parts))


def _rung(cut: _Cut, model: StepModel, memory_a_cell: float) -> Rung:
    """Turn a cut into figures."""
    time = cut.predicted(model)
    halo = np.bincount(cut.pairs.part, cut.pairs.received_cells, cut.n_parts)
    mean = cut.work.mean()
    return Rung(
        n_parts=cut.n_parts,
        cells_max=int(cut.cells.max()),
        step_seconds=time.total,
        speed_up=time.speed_up,
        efficiency=time.efficiency,
        exchange_share=time.exchange_share,
        imbalance=float(cut.work.max() / mean - 1) if mean > 0 else 0.0,
        halo_share=float(halo.sum() / cut.cells.sum()),
        neighbours_max=int(np.bincount(cut.pairs.part, minlength=cut.n_parts).max()),
        memory_bytes=float((cut.cells + halo).max() * memory_a_cell),
    )


def _weak(cut: _Cut, model: StepModel) -> tuple[WeakRung, ...]:
    """Predict the first 1, 2, 4, ... parts, each as a mesh of its own."""
    rungs = []
    for count in ladder(1, cut.n_parts):
        region = cut.first(count)
        time = region.predicted(_for_region(model, region, cut))
        efficiency = float(time.work.mean() / time.total) if time.total > 0 else 1.0
        rungs.append(WeakRung(count, time.total, efficiency))
    return tuple(rungs)


def _for_region(model: StepModel, region: _Cut, whole: _Cut) -> StepModel:
    """Return the model with the work of a mean cell of the region, where it has any."""
    weight = region.work.sum() / region.cells.sum()
    mean = whole.work.sum() / whole.cells.sum()
    if not weight > 0:
        return model
    return replace(model, cell_seconds=float(model.cell_seconds * weight / mean))
