"""The gate of an assessment: cell numbers, weights, speeds and limits checked and cast once."""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite
from typing import TypeVar

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import Array, FloatArray
from sfcpart.errors import InputError, PartitionError, SfcpartError, WeightError
from sfcpart.graph import CellGraph
from sfcpart.partition import Partition
from sfcpart.slices.fixed import fixed_sum, largest_values
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["Given", "cast_graph", "check_given", "frozen"]

A = TypeVar("A", bound=Array)


@dataclass(frozen=True, eq=False)
class Given:
    """What the user gave beside mesh and partition, checked.

    Attributes
    ----------
    weight : (n_cells,) float64 or None
    speed : (n_parts,) float64
        Scaled to a mean of 1.
    limit_weight : (n_cells,) float64 or None
    part_limit : (n_parts,) float64 or None
    """

    weight: FloatArray | None
    speed: FloatArray
    limit_weight: FloatArray | None
    part_limit: FloatArray | None


def frozen(array: A) -> A:
    """Return a read-only view, so that kernels see one array type and compile once."""
    view = array.view()
    view.flags.writeable = False
    return view


def cast_graph(graph: CellGraph) -> CellGraph:
    """Return the graph as kernels take it: one dtype for each array, contiguous, read-only."""
    indices = graph.indices
    if indices.dtype not in (np.int32, np.int64):
        indices = indices.astype(np.int64)
    return CellGraph(
        indptr=frozen(np.ascontiguousarray(graph.indptr, np.int64)),
        indices=frozen(np.ascontiguousarray(indices)),
        data=frozen(np.ascontiguousarray(graph.data, np.float64)),
        boundary_count=frozen(np.ascontiguousarray(graph.boundary_count, np.int32)),
        boundary_measure=frozen(np.ascontiguousarray(graph.boundary_measure, np.float64)),
    )


def check_given(
    held: MeshSlice,
    graph: GraphSlice | None,
    partition: Partition,
    *,
    weights: ArrayLike | None,
    speeds: ArrayLike | None,
    limit_weights: ArrayLike | None,
    limits: ArrayLike | None,
) -> Given:
    """Check that everything belongs together, and cast it (collective)."""
    comm, n_parts, found, error = held.comm, partition.n_parts, None, None
    try:
        _check_counts(held, graph, partition)
        if (limit_weights is None) != (limits is None):
            missing = "limits" if limits is None else "limit_weights"
            raise WeightError(f"{missing} missing: a limit needs both limit_weights and limits")
        found = Given(
            weight=_cell_values("weights", weights, held),
            speed=_speeds(speeds, n_parts),
            limit_weight=_cell_values("limit_weights", limit_weights, held),
            part_limit=None if limits is None else _part_values("limits", limits, n_parts),
        )
    except SfcpartError as caught:
        error = caught
    comm.check(error)
    assert found is not None
    for name, values in (("weights", found.weight), ("limit_weights", found.limit_weight)):
        if values is not None:
            _check_total(name, values, held)
    return found


def _check_counts(held: MeshSlice, graph: GraphSlice | None, partition: Partition) -> None:
    """Refuse a partition or a graph of other cells."""
    if partition.n_cells != held.n_local:
        raise PartitionError(
            f"the partition has {partition.n_cells} cells, the mesh {held.n_local}; "
            "wanted one part for each cell of the mesh"
        )
    if graph is not None and graph.n_local != held.n_local:
        raise InputError(
            f"the cell graph has {graph.n_local} cells, the mesh {held.n_local}; "
            "wanted its own graph"
        )


def _cell_values(name: str, values: ArrayLike | None, held: MeshSlice) -> FloatArray | None:
    """Cast one non-negative finite number for each cell of this rank."""
    if values is None:
        return None
    array, n = _numbers(name, values), held.n_local
    if array.shape != (n,):
        raise WeightError(f"{name} has shape {array.shape}; wanted one number a cell, ({n},)")
    is_bad = ~(np.isfinite(array) & (array >= 0))
    _refuse(name, array, is_bad, "finite numbers, at least 0", first=held.first_gid)
    return array


def _check_total(name: str, values: FloatArray, held: MeshSlice) -> None:
    """Refuse values whose sum is beyond the numbers."""
    (largest,) = largest_values([values], held.comm)
    if isfinite(largest * held.n_cells):
        return
    if not isfinite(fixed_sum(values, n_values=held.n_cells, comm=held.comm)):
        at = np.flatnonzero(values == largest)
        mine = held.first_gid + int(at[0]) if len(at) else held.n_cells
        cell = int(held.comm.allreduce(np.array([mine], np.int64), "min")[0])
        raise WeightError(
            f"{name} add up to more than a float64 holds (largest: {name}[{cell}] = "
            f"{largest:g}); divide them all by a common number"
        )


def _part_values(name: str, values: ArrayLike, n_parts: int) -> FloatArray:
    """Cast one positive finite number for each part, or one for all."""
    array = _numbers(name, values)
    if array.shape not in ((), (n_parts,)):
        raise WeightError(f"{name} has shape {array.shape}; wanted one number a part, ({n_parts},)")
    array = np.ascontiguousarray(np.broadcast_to(array, (n_parts,)))
    _refuse(name, array, ~(np.isfinite(array) & (array > 0)), "finite numbers above 0")
    return array


def _speeds(speeds: ArrayLike | None, n_parts: int) -> FloatArray:
    """Cast speeds and scale them to a mean of 1."""
    if speeds is None:
        return np.ones(n_parts)
    array = _part_values("speeds", speeds, n_parts)
    scaled: FloatArray = array / array.max()
    scaled /= scaled.mean()
    return scaled


def _numbers(name: str, values: ArrayLike) -> FloatArray:
    """Cast to float64, or say what was found."""
    array = np.asarray(values)
    if array.dtype.kind not in "iufb":
        raise WeightError(f"{name} holds {array.dtype} values; wanted numbers")
    return np.asarray(array, dtype=np.float64, order="C")


def _refuse(name: str, array: FloatArray, is_bad: Array, wanted: str, *, first: int = 0) -> None:
    """Name the first offender; `first` is the number of the first row."""
    if is_bad.any():
        row = int(np.flatnonzero(is_bad)[0])
        raise WeightError(f"{name}[{first + row}] is {array[row]}; wanted {wanted}")
