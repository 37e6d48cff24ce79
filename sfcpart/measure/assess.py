"""Measure a partition from anywhere: balance, cut, halo, pieces, shape, bounds, predicted time.

Stages: gate -> sums over cells (`sums`) -> figures by part and in total (`figures`) -> bounds.
10^6 tets in 64 parts take about 0.07 s on two cores (tools/bench/measure.py); beside mesh and graph
25 bytes a cell.
"""

from __future__ import annotations

from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import BoolArray, FloatArray, Int32Array
from sfcpart.graph import CellGraph
from sfcpart.measure.assessment import Assessment, Number
from sfcpart.measure.columns import TOTAL_COLUMNS
from sfcpart.measure.cut_figures import cut_figures
from sfcpart.measure.figures import part_figures, total_figures
from sfcpart.measure.gate import Given, cast_graph, check_given
from sfcpart.measure.shape import flat_axes, part_stretch
from sfcpart.measure.step_model import StepModel, StepTime
from sfcpart.measure.sums import CellSums, sum_cells
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition

__all__ = ["assess_partition"]


def assess_partition(
    mesh: Mesh,
    graph: CellGraph | None,
    partition: Partition,
    *,
    weights: ArrayLike | None = None,
    speeds: ArrayLike | None = None,
    step_model: StepModel | None = None,
    limit_weights: ArrayLike | None = None,
    limits: ArrayLike | None = None,
) -> Assessment:
    """Measure a partition, wherever it comes from.

    Parameters
    ----------
    mesh : Mesh
    graph : CellGraph or None
        Cell graph of the mesh; None for meshes known by their centres only: figures that need
        faces are then None.
    partition : Partition
        Of the cells of the mesh.
    weights : (n_cells,) numbers >= 0, optional
        Work of each cell; 1 by default. Sums are exact for whole numbers up to 2^53.
    speeds : (n_parts,) numbers > 0, optional
        Relative speed of each part's rank; equal by default.
    step_model : StepModel, optional
        Numbers behind the predicted times; `StepModel()` by default.
    limit_weights : (n_cells,) numbers >= 0, optional
        Second weight (memory).
    limits : (n_parts,) numbers > 0 or one number, optional
        The most of it that a part may hold.

    Returns
    -------
    Assessment
        `sfcpart.measure.columns` says what each figure means. A partition changes the order in
        which a solver sums; none of the figures says whether a simulation is right.

    Raises
    ------
    PartitionError, WeightError, InputError
        If partition, graph, weights, speeds or limits do not belong to the mesh, or are negative
        or not finite.

    Notes
    -----
    O(n_cells + entries + pairs of parts log pairs); the same bits for any number of threads.
    """
    given = check_given(
        mesh,
        graph,
        partition,
        weights=weights,
        speeds=speeds,
        limit_weights=limit_weights,
        limits=limits,
    )
    graph = None if graph is None else cast_graph(graph)
    model = StepModel() if step_model is None else step_model
    sums = sum_cells(mesh, graph, partition, given)
    time = _step_time(sums, given, model)
    used_axes = flat_axes(mesh)
    flat_dim = None if used_axes is None else mesh.dim
    part = part_figures(sums, given, stretch=_stretch(sums, mesh), flat_dim=flat_dim, time=time)
    total: dict[str, Number] = dict.fromkeys(column.name for column in TOTAL_COLUMNS)
    total |= total_figures(part, given, time=time)
    if graph is not None and sums.faces is not None:
        total |= cut_figures(mesh, graph, part=part, total=total)
    for column in part.values():
        if column is not None:
            column.flags.writeable = False
    return Assessment(
        part=MappingProxyType(part),
        total=MappingProxyType(total),
        empty_parts=_which(sums.cells == 0),
        split_parts=_which(np.zeros(0, bool) if sums.faces is None else sums.faces.pieces > 1),
        pairs=None if sums.faces is None else sums.faces.pairs,
        step_model=model,
    )


def _step_time(sums: CellSums, given: Given, model: StepModel) -> StepTime | None:
    """Predict one step where the exchanges are known."""
    if sums.faces is None:
        return None
    return model.predict(
        sums.weight, sums.faces.pairs, speed=given.speed, n_cells=int(sums.cells.sum())
    )


def _stretch(sums: CellSums, mesh: Mesh) -> FloatArray:
    """Return the stretch of every part; without measures boxes are not lengthened."""
    measure = np.zeros(len(sums.cells)) if sums.measure is None else sums.measure
    return part_stretch(sums.low, sums.high, n_cells=sums.cells, measure=measure, dim=mesh.dim)


def _which(is_so: BoolArray) -> Int32Array:
    """Return the numbers of the parts for which it is so."""
    return np.flatnonzero(is_so).astype(np.int32)
