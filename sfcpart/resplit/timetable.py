"""A whole run at a glance: what every split would cost in every later frame.

Frame k of a run can be computed with the split made in any frame i <= k. The table holds the
predicted step of each pair, and what re-splitting in k costs where the split of i is in use. Splits
are made by what a frame weighs alone, not by the split before, so these pairs are all there is:
every rule is a path through the table, and the best path is found exactly
(`sfcpart.resplit.hindsight`). New parts are renamed to keep most cells at home, which does not
depend on earlier names; not so where ranks differ in speed, which a name stands for. Cost: n^2/2
passes over the cells of n frames, and memory for the parts of every split, carried to the newest
frame (a byte a cell up to 256 parts); frames are streamed, two meshes at a time.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import dataclass, replace
from math import isfinite

import numpy as np

from sfcpart.dtypes import PART, Array, FloatArray, Int32Array, Int64Array
from sfcpart.errors import InputError, WeightError
from sfcpart.files.series.frame import Frame
from sfcpart.graph import CellGraph, cell_graph
from sfcpart.kernels.measure import count_cuts
from sfcpart.kernels.threads import run_ranges
from sfcpart.measure.gate import cast_graph, frozen
from sfcpart.measure.pairs import PartPairs
from sfcpart.measure.step_model import StepModel
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.resplit.migration import CELL_BYTES, Migration
from sfcpart.resplit.origin import home_parts
from sfcpart.resplit.overlap import Overlap
from sfcpart.resplit.relabel import best_labels

__all__ = ["ResplitCost", "Timetable", "frame_speed", "make_timetable"]

Split = Callable[[Frame, FloatArray], Int32Array]
"""Splits a frame by the weights of its cells."""


@dataclass(frozen=True)
class ResplitCost:
    """What a re-split takes beside moving cells.

    Attributes
    ----------
    seconds : float
        For each re-split, whatever its size: the solver's own setting up (default 0).
    split_seconds : float
        For each cell of the mean rank: keys, order, new lists (default 2e-6, twice the work of a
        cell in a step; our own choice, to be replaced by a measurement).
    cell_bytes : float
        That a cell which moves takes along.

    Examples
    --------
    >>> ResplitCost(seconds=0.5).split_seconds
    2e-06
    """

    seconds: float = 0.0
    split_seconds: float = 2e-6
    cell_bytes: float = CELL_BYTES

    def __post_init__(self) -> None:
        for name in ("seconds", "split_seconds", "cell_bytes"):
            value = getattr(self, name)
            if not (isfinite(value) and value >= 0):
                raise InputError(f"{name} of a re-split is {value}; wanted a finite number >= 0")


@dataclass(frozen=True, eq=False)
class Timetable:
    """Every split in every frame; entry [i, k] is the split of frame i in frame k >= i.

    Attributes
    ----------
    slowest, mean : (n_frames, n_frames) float64
        Predicted seconds of a step of the slowest and of the mean rank; NaN where k < i.
    imbalance : (n_frames, n_frames) float64
        Largest over mean work for a rank's speed, minus 1.
    cost : (n_frames, n_frames) float64
        Seconds of re-splitting at the begin of frame k; NaN where k <= i.
    moved_bytes : (n_frames, n_frames) float64
        What moves then.
    steps : (n_frames,) int64
        Steps each frame lasts.
    n_cells : (n_frames,) int64
    n_parts : int
    """

    slowest: FloatArray
    mean: FloatArray
    imbalance: FloatArray
    cost: FloatArray
    moved_bytes: FloatArray
    steps: Int64Array
    n_cells: Int64Array
    n_parts: int

    @property
    def n_frames(self) -> int:
        """Number of frames."""
        return len(self.steps)


def make_timetable(
    frames: Iterable[Frame],
    n_parts: int,
    *,
    split: Split,
    weigh: Callable[[Frame], FloatArray],
    model: StepModel,
    resplit: ResplitCost,
    progress: Callable[[int], None] = lambda done: None,
) -> Timetable:
    """Go through a series once and fill the table.

    Parameters
    ----------
    frames : iterable of Frame
    n_parts : int
    split : callable
        `split(frame, weight)` returns the part of each cell.
    weigh : callable
        Returns the weight of each cell of a frame; the mean cell of the first frame takes the
        model's `cell_seconds`, in all frames.
    model : StepModel
    resplit : ResplitCost
    progress : callable
        Called with the number of frames done.

    Raises
    ------
    InputError
        If there is no frame, or parents do not belong to the frame before.
    """
    columns: list[_Column] = []
    old: list[_Carried] = []
    scale, before = 0.0, None
    for number, frame in enumerate(frames):
        weight = weigh(frame)
        scale = scale or float(weight.mean())
        now = replace(model, cell_seconds=model.cell_seconds * (float(weight.mean()) / scale))
        if before is not None:
            _carry(old, frame, before, number)
        _check_speeds(old, frame, number)
        state = _State(frame, weight, frame_speed(frame, n_parts), n_parts, now)
        packed = split(frame, weight).astype(np.min_scalar_type(n_parts - 1))
        new = _Carried(packed, has_speed=frame.speed is not None)
        columns.append(_column(old, new, state, resplit))
        old.append(new)
        before = frame.mesh
        progress(number + 1)
    if not columns:
        raise InputError("the series is empty; wanted at least one frame")
    return _table(columns, n_parts)


@dataclass(eq=False)
class _Carried:
    """A split carried to the newest frame, packed; its pairs are kept while the mesh stays."""

    packed: Array
    has_speed: bool
    pairs: PartPairs | None = None

    @property
    def part(self) -> Int32Array:
        """Part of each cell."""
        return self.packed.astype(PART)


@dataclass(frozen=True, eq=False)
class _State:
    """A frame with all that its steps depend on."""

    frame: Frame
    weight: FloatArray
    speed: FloatArray
    n_parts: int
    model: StepModel


@dataclass(frozen=True, eq=False)
class _Column:
    """One frame's entries of the table, by the frame of the split."""

    step: FloatArray
    cost: FloatArray
    steps: int
    n_cells: int


def frame_speed(frame: Frame, n_parts: int) -> FloatArray:
    """Return one positive speed for each part, 1 each where the frame has none."""
    if frame.speed is None:
        return np.ones(n_parts)
    speed: FloatArray = np.asarray(frame.speed, np.float64)
    if speed.shape != (n_parts,) or not np.all(np.isfinite(speed) & (speed > 0)):
        raise WeightError(
            f"speeds of a frame have shape {speed.shape}; wanted {n_parts} numbers above 0"
        )
    return speed


def _carry(old: list[_Carried], frame: Frame, before: Mesh, number: int) -> None:
    """Give each cell the part of the cell it comes from, in every split so far."""
    if frame.parent is None and _same_cells(frame.mesh, before):
        return
    cells = Partition.from_array(np.arange(before.n_cells), before.n_cells)
    centers = {"old_centers": before.centers, "centers": frame.mesh.centers}
    try:
        origin = home_parts(cells, frame.n_cells, parent=frame.parent, **centers)
    except InputError as error:
        raise InputError(f"frame {number}: {error}") from error
    for carried in old:
        carried.pairs = None
        carried.packed = carried.packed[origin]


def _same_cells(mesh: Mesh, before: Mesh) -> bool:
    """Tell whether two meshes have the same centres, and so the same cells."""
    return mesh.centers is before.centers or np.array_equal(mesh.centers, before.centers)


def _check_speeds(old: list[_Carried], frame: Frame, number: int) -> None:
    """Refuse speeds in some frames only: without them parts are renamed."""
    if old and old[0].has_speed != (frame.speed is not None):
        raise InputError(f"frame {number}: wanted speeds in all frames or in none")


def _column(old: list[_Carried], new: _Carried, state: _State, resplit: ResplitCost) -> _Column:
    """Predict steps with every split, and what replacing each old one costs."""
    graph = _graph(state.frame.mesh)
    step = np.array([_step(carried, state, graph) for carried in (*old, new)])
    split = resplit.seconds + resplit.split_seconds * state.frame.n_cells / state.n_parts
    cost = np.array([_moving(carried, new, state, resplit) for carried in old]).reshape(-1, 2)
    cost[:, 0] += split
    return _Column(step, cost, int(state.frame.steps), state.frame.n_cells)


def _graph(mesh: Mesh) -> CellGraph | None:
    """Return the cell graph as kernels take it, None for bare centres."""
    if mesh.points is None and mesh.faces is None:
        return None
    return cast_graph(cell_graph(mesh))


def _step(carried: _Carried, state: _State, graph: CellGraph | None) -> tuple[float, float, float]:
    """Return slowest rank, mean rank and imbalance of a step with one split."""
    part = carried.part
    load = np.bincount(part, state.weight, minlength=state.n_parts).astype(np.float64)
    if carried.pairs is None:
        carried.pairs = _pairs(part, graph, state.n_parts)
    time = state.model.predict(load, carried.pairs, speed=state.speed, n_cells=state.frame.n_cells)
    work_mean = float(load.sum() / state.speed.sum())
    worst = float((load / state.speed).max()) / work_mean - 1.0 if work_mean > 0 else 0.0
    return time.total, float((time.work + time.exchange).mean()), worst


def _pairs(part: Int32Array, graph: CellGraph | None, n_parts: int) -> PartPairs:
    """Find which parts exchange how many cells; none for bare centres."""
    if graph is None:
        return PartPairs(*(np.zeros(0, np.int32),) * 2, *(np.zeros(0, np.int64),) * 3)
    part = frozen(part)
    count, measure = np.empty(graph.n_cells, np.int32), np.empty(graph.n_cells)
    run_ranges(
        count_cuts, graph.n_cells, graph.indptr, graph.indices, graph.data, part, count, measure
    )
    cut = np.bincount(part, count, minlength=n_parts).astype(np.int64)
    return PartPairs.from_cuts(
        count, cut, indptr=graph.indptr, indices=graph.indices, cell_part=part
    )


def _moving(
    carried: _Carried, new: _Carried, state: _State, resplit: ResplitCost
) -> tuple[float, float]:
    """Return seconds and bytes of moving cells from an old split to the new one."""
    n_parts = state.n_parts
    overlap = Overlap.of(carried.part, new.part, n_old_parts=n_parts, n_parts=n_parts)
    if state.frame.speed is None:
        overlap = overlap.renamed(best_labels(overlap))
    moved = Migration.of_overlap(
        overlap,
        most=np.zeros(n_parts, np.int64),
        cell_bytes=resplit.cell_bytes,
        network=state.model.network,
    )
    return moved.seconds, moved.moved_bytes


def _table(columns: list[_Column], n_parts: int) -> Timetable:
    """Put the columns side by side."""
    n = len(columns)
    step, cost = np.full((n, n, 3), np.nan), np.full((n, n, 2), np.nan)
    for k, column in enumerate(columns):
        step[: k + 1, k] = column.step
        cost[:k, k] = column.cost
    arrays = (*np.moveaxis(step, 2, 0), *np.moveaxis(cost, 2, 0))
    slowest, mean, imbalance, seconds, moved = (np.ascontiguousarray(a) for a in arrays)
    steps = np.array([column.steps for column in columns], np.int64)
    n_cells = np.array([column.n_cells for column in columns], np.int64)
    return Timetable(slowest, mean, imbalance, seconds, moved, steps, n_cells, n_parts)
