"""The passes over cells and rows of the cell graph: everything counted or summed by part.

Threaded passes over the rows (cut faces; pieces) and over the cells. Float values are summed as
whole numbers in fixed point (`sfcpart.slices.fixed`), and those of a cell in the order of its row,
so that no figure depends on the number of threads or ranks.

Over ranks: about 15 reductions, the largest of 8 bytes x parts x (3 + 2 values), 11 of them by
part; what `pieces` and `pairs` send.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import isfinite

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import OFFSET, FloatArray, Int32Array, Int64Array
from sfcpart.kernels.measure import count_cuts, sum_parts
from sfcpart.kernels.threads import n_threads, run_ranges
from sfcpart.measure.gate import Given, frozen
from sfcpart.measure.pairs import PartPairs
from sfcpart.measure.shape import has_measures
from sfcpart.slices.fixed import FixedPoint, largest_values
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.pieces import find_pieces

__all__ = ["CellSums", "FaceSums", "sum_cells"]

_NONE = np.zeros(0)
_SMALLEST = 16_384


@dataclass(frozen=True, eq=False)
class FaceSums:
    """What needs the cell graph; all but the last two are (n_parts,).

    `pairs` are those of the parts that this rank owns, in blocks.
    """

    cut_faces: Int64Array
    cut_measure: FloatArray
    boundary_faces: Int64Array
    boundary_measure: FloatArray
    pieces: Int64Array
    largest_piece: Int64Array
    n_faces: int
    pairs: PartPairs


@dataclass(frozen=True, eq=False)
class CellSums:
    """What is summed over the cells of each part, of all ranks.

    `low` and `high` box their centres; `measure` is None where the measures of the cells are not
    known; `heaviest` is the largest weight of a cell and `is_equal` tells whether all weigh that.
    """

    cells: Int64Array
    weight: FloatArray
    measure: FloatArray | None
    limit_weight: FloatArray
    low: FloatArray
    high: FloatArray
    heaviest: float
    is_equal: bool
    faces: FaceSums | None


def sum_cells(
    held: MeshSlice, graph: GraphSlice | None, cell_part: Int32Array, n_parts: int, given: Given
) -> CellSums:
    """Run the passes (collective)."""
    cell_part = frozen(cell_part)
    all_part = cell_part if graph is None else frozen(graph.extend(cell_part))
    cut_count, cut_measure = _cuts(graph, all_part)
    values = (
        _NONE if given.weight is None else given.weight,
        held.mesh.measures if has_measures(held.mesh) else _NONE,
        _NONE if given.limit_weight is None else given.limit_weight,
        cut_measure,
        _NONE if graph is None else graph.boundary_measure,
    )
    counts = (cut_count, np.zeros(0, np.int32) if graph is None else graph.boundary_count)
    sums = _PartSums.of(cell_part, n_parts, values, counts, held)
    faces = None
    if graph is not None:
        faces = _face_sums(graph, all_part, cut_count, sums)
    weight = sums.cells.astype(np.float64) if given.weight is None else sums.value[0]
    measure = sums.value[1] if has_measures(held.mesh) else None
    heaviest, is_equal = _heaviest(given.weight, sums.largest[0], held.comm)
    box = (sums.low, sums.high)
    return CellSums(sums.cells, weight, measure, sums.value[2], *box, heaviest, is_equal, faces)


def _cuts(graph: GraphSlice | None, all_part: Int32Array) -> tuple[Int32Array, FloatArray]:
    """Count and measure the cut faces of each cell (nothing without faces)."""
    if graph is None:
        return np.zeros(0, np.int32), _NONE
    cut_count = np.empty(graph.n_local, np.int32)
    cut_measure = np.empty(graph.n_local)
    rows = (graph.indptr, graph.indices, graph.data)
    run_ranges(count_cuts, graph.n_local, *rows, all_part, cut_count, cut_measure)
    return cut_count, cut_measure


@dataclass(frozen=True, eq=False)
class _PartSums:
    """Sums by part over all ranks: cells, values and counts in the order given, boxes."""

    cells: Int64Array
    value: list[FloatArray]
    count: list[Int64Array]
    low: FloatArray
    high: FloatArray
    largest: list[float]

    @classmethod
    def of(
        cls,
        cell_part: Int32Array,
        n_parts: int,
        values: tuple[FloatArray, ...],
        counts: tuple[Int32Array, ...],
        held: MeshSlice,
    ) -> _PartSums:
        """Sum in blocks of cells on each rank, then over ranks."""
        comm, n = held.comm, held.n_cells
        largest = largest_values(list(values), comm)
        beyond = {k: values[k] for k in range(len(values)) if not isfinite(largest[k])}
        values = tuple(_finite(array) if k in beyond else array for k, array in enumerate(values))
        fixed = [FixedPoint.of(x if isfinite(x) else np.finfo(float).max, n) for x in largest]
        n_columns = 1 + len(counts) + 2 * len(values)
        n_blocks = max(1, min(n_threads(), held.n_local // max(_SMALLEST, n_parts)))
        bounds = np.linspace(0, held.n_local, n_blocks + 1).astype(OFFSET)
        total = np.zeros((n_blocks, n_parts, n_columns), np.int64)
        low = np.full((n_blocks, n_parts, held.mesh.space_dim), np.inf)
        high = np.full_like(low, -np.inf)
        run_ranges(
            sum_parts,
            n_blocks,
            bounds,
            cell_part,
            tuple(frozen(array) for array in values),
            np.array([scale.factor for scale in fixed]),
            2.0 ** fixed[0].n_bits,
            tuple(frozen(array) for array in counts),
            frozen(held.mesh.centers),
            total,
            low,
            high,
            smallest=1,
        )
        column = list(np.ascontiguousarray(comm.allreduce(total.sum(axis=0)).T))
        words = column[1 + len(counts) :]
        value = [scale.value(words[2 * k], words[2 * k + 1]) for k, scale in enumerate(fixed)]
        for k, array in beyond.items():
            value[k] += _beyond(array, cell_part, n_parts, comm)
        low = comm.allreduce(low.min(axis=0), "min")
        high = comm.allreduce(high.max(axis=0), "max")
        return cls(column[0], value, column[1 : 1 + len(counts)], low, high, largest)


def _finite(values: FloatArray) -> FloatArray:
    """Put 0 where a value is beyond the numbers."""
    return np.where(np.isfinite(values), values, 0.0)


def _beyond(values: FloatArray, cell_part: Int32Array, n_parts: int, comm: Comm) -> FloatArray:
    """Return infinity for parts with a value beyond the numbers, 0 for the rest."""
    sums = np.zeros(n_parts)
    if len(values):
        sums[cell_part[~np.isfinite(values)]] = np.inf
    return comm.allreduce(sums, "max")


def _heaviest(weight: FloatArray | None, heaviest: float, comm: Comm) -> tuple[float, bool]:
    """Return the largest weight of a cell and whether all cells weigh that."""
    if weight is None:
        return 1.0, True
    is_equal = np.array([bool((weight == heaviest).all())])
    return heaviest, bool(comm.allreduce(is_equal, "min")[0])


def _face_sums(
    graph: GraphSlice, all_part: Int32Array, cut_count: Int32Array, sums: _PartSums
) -> FaceSums:
    """Gather what needs faces: pairs of parts and pieces beside the sums."""
    cut_faces, boundary_faces = sums.count
    n_faces = int(graph.comm.allreduce(np.array([len(graph.indices)], np.int64))[0]) // 2
    pairs = PartPairs.of_slices(graph, all_part, cut_count, len(cut_faces))
    pieces, largest = _pieces(graph, all_part, len(cut_faces))
    measures = (sums.value[3], boundary_faces, sums.value[4])
    return FaceSums(cut_faces, *measures, pieces, largest, n_faces, pairs)


def _pieces(graph: GraphSlice, all_part: Int32Array, n_parts: int) -> tuple[Int64Array, Int64Array]:
    """Count connected components inside each part, and the cells of the largest."""
    pieces, largest = np.zeros((2, n_parts), np.int64)
    cell, size = find_pieces(graph, all_part).counted(graph)
    np.add.at(pieces, all_part[cell], 1)
    np.maximum.at(largest, all_part[cell], size)
    return graph.comm.allreduce(pieces), graph.comm.allreduce(largest, "max")
