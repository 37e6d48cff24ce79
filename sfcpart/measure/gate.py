"""The gate of an assessment: cell numbers, weights, speeds and limits checked and cast once."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TypeVar

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import Array, FloatArray
from sfcpart.errors import InputError, PartitionError, WeightError
from sfcpart.graph import CellGraph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition

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
    mesh: Mesh,
    graph: CellGraph | None,
    partition: Partition,
    *,
    weights: ArrayLike | None,
    speeds: ArrayLike | None,
    limit_weights: ArrayLike | None,
    limits: ArrayLike | None,
) -> Given:
    """Check that everything belongs together, and cast it."""
    n_cells, n_parts = mesh.n_cells, partition.n_parts
    if partition.n_cells != n_cells:
        raise PartitionError(
            f"the partition has {partition.n_cells} cells, the mesh {n_cells}; "
            "wanted one part for each cell of the mesh"
        )
    if graph is not None and graph.n_cells != n_cells:
        raise InputError(
            f"the cell graph has {graph.n_cells} cells, the mesh {n_cells}; wanted its own graph"
        )
    if (limit_weights is None) != (limits is None):
        missing = "limits" if limits is None else "limit_weights"
        raise WeightError(f"{missing} missing: a limit needs both limit_weights and limits")
    return Given(
        weight=_cell_values("weights", weights, n_cells),
        speed=_speeds(speeds, n_parts),
        limit_weight=_cell_values("limit_weights", limit_weights, n_cells),
        part_limit=None if limits is None else _part_values("limits", limits, n_parts),
    )


def _cell_values(name: str, values: ArrayLike | None, n_cells: int) -> FloatArray | None:
    """Cast one non-negative finite number for each cell."""
    if values is None:
        return None
    array = _numbers(name, values)
    if array.shape != (n_cells,):
        raise WeightError(f"{name} has shape {array.shape}; wanted one number a cell, ({n_cells},)")
    _refuse(name, array, ~(np.isfinite(array) & (array >= 0)), "finite numbers, at least 0")
    with np.errstate(over="ignore"):
        total = float(array.sum())
    if not np.isfinite(total):
        largest = int(np.argmax(array))
        raise WeightError(
            f"{name} add up to more than a float64 holds (largest: {name}[{largest}] = "
            f"{array[largest]:g}); divide them all by a common number"
        )
    return array


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


def _refuse(name: str, array: FloatArray, is_bad: Array, wanted: str) -> None:
    """Name the first offender."""
    if is_bad.any():
        first = int(np.flatnonzero(is_bad)[0])
        raise WeightError(f"{name}[{first}] is {array[first]}; wanted {wanted}")
