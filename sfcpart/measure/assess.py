"""Measure a partition from anywhere: balance, cut, halo, pieces, shape, bounds, predicted time.

Stages: gate -> sums over cells (`sums`) -> figures by part and in total (`figures`) -> bounds.
10^6 tets in 64 parts take about 0.07 s on two cores (tools/bench/measure.py); beside mesh and graph
25 bytes a cell.
"""

from __future__ import annotations

from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm.base import Comm
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
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["assess_partition", "assess_slice"]


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
    O(n_cells + entries + pairs of parts log pairs); the same bits for any number of threads, and
    for any number of ranks (`assess_slice`).
    """
    return assess_slice(
        MeshSlice.whole(mesh),
        None if graph is None else GraphSlice.whole(cast_graph(graph)),
        partition,
        weights=weights,
        speeds=speeds,
        step_model=step_model,
        limit_weights=limit_weights,
        limits=limits,
    )


def assess_slice(
    held: MeshSlice,
    graph: GraphSlice | None,
    partition: Partition,
    *,
    weights: ArrayLike | None = None,
    speeds: ArrayLike | None = None,
    step_model: StepModel | None = None,
    limit_weights: ArrayLike | None = None,
    limits: ArrayLike | None = None,
) -> Assessment:
    """Measure a partition of a mesh that lies on many ranks (collective).

    Parameters
    ----------
    held, graph : MeshSlice, GraphSlice or None
        What this rank holds of mesh and graph.
    partition : Partition
        Part of each cell of this rank; the number of parts is that of all ranks.
    weights, limit_weights : (n_local,) numbers >= 0, optional
        Of the cells of this rank.
    speeds, step_model, limits
        As for `assess_partition`, the same on all ranks.

    Returns
    -------
    Assessment
        The same bits on every rank for any number of ranks; `pairs` on rank 0 only.

    Raises
    ------
    PartitionError, WeightError, InputError
        On all ranks alike, as `assess_partition`.

    Notes
    -----
    Reductions of less than 250 bytes a part, no array longer than parts or this rank's cells but
    the pairs of parts that meet, on rank 0 (28 bytes each). See `sums`, `pairs` and
    `sfcpart.slices.pieces` for what is sent.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.slices.graph_slice import graph_slice
    >>> from sfcpart.slices.mesh_slice import cut_mesh
    >>> row = Mesh.from_faces([[0, 1], [1, 2]], [1, 1], [[0, 0], [1, 0], [2, 0]], [1, 1, 1])
    >>> def act(comm):
    ...     held = cut_mesh(row, comm)
    ...     half = Partition.from_array([[0], [0, 1]][comm.rank], 2)
    ...     return assess_slice(held, graph_slice(held), half).total["cut_faces"]
    >>> run_ranks(2, act)
    [1, 1]
    """
    given = check_given(
        held,
        graph,
        partition,
        weights=weights,
        speeds=speeds,
        limit_weights=limit_weights,
        limits=limits,
    )
    model = StepModel() if step_model is None else step_model
    sums = sum_cells(held, graph, partition.cell_part, partition.n_parts, given)
    return _assessment(held, graph, sums, given, model)


def _assessment(
    held: MeshSlice, graph: GraphSlice | None, sums: CellSums, given: Given, model: StepModel
) -> Assessment:
    """Turn sums into figures."""
    time = _step_time(sums, given, model, held.comm)
    flat_dim = None if flat_axes(held) is None else held.mesh.dim
    stretch = _stretch(sums, held.mesh)
    part = part_figures(sums, given, stretch=stretch, flat_dim=flat_dim, time=time, comm=held.comm)
    total: dict[str, Number] = dict.fromkeys(column.name for column in TOTAL_COLUMNS)
    total |= total_figures(part, sums, given, time=time)
    if graph is not None and sums.faces is not None:
        n_faces = sums.faces.n_faces
        total |= cut_figures(held, graph, part=part, total=total, n_faces=n_faces)
    for column in part.values():
        if column is not None:
            column.flags.writeable = False
    return Assessment(
        part=MappingProxyType(part),
        total=MappingProxyType(total),
        empty_parts=_which(sums.cells == 0),
        split_parts=_which(np.zeros(0, bool) if sums.faces is None else sums.faces.pieces > 1),
        pairs=None if sums.faces is None else sums.faces.pairs.gathered(held.comm),
        step_model=model,
    )


def _step_time(sums: CellSums, given: Given, model: StepModel, comm: Comm) -> StepTime | None:
    """Predict one step where the exchanges are known."""
    if sums.faces is None:
        return None
    # each part's messages are added by the rank that owns it; the others have 0
    exchange = model.exchange_seconds(sums.faces.pairs, len(sums.cells))
    exchange = comm.allreduce(exchange, "max")
    n_cells = int(sums.cells.sum())
    return model.predict_from(sums.weight, exchange, speed=given.speed, n_cells=n_cells)


def _stretch(sums: CellSums, mesh: Mesh) -> FloatArray:
    """Return the stretch of every part; without measures boxes are not lengthened."""
    measure = np.zeros(len(sums.cells)) if sums.measure is None else sums.measure
    return part_stretch(sums.low, sums.high, n_cells=sums.cells, measure=measure, dim=mesh.dim)


def _which(is_so: BoolArray) -> Int32Array:
    """Return the numbers of the parts for which it is so."""
    return np.flatnonzero(is_so).astype(np.int32)
