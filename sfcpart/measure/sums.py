"""The passes over cells and rows of the cell graph: everything counted or summed by part.

Two threaded passes over the rows (cut faces; pieces), one pass over the cells. Whole numbers are
exact. Float sums per part are taken in cell order by one pass, and those of a cell in the order of
its row, so that no figure depends on the number of threads.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import FloatArray, Int32Array, Int64Array
from sfcpart.graph import CellGraph
from sfcpart.kernels.measure import (
    count_cuts,
    sum_parts,
)
from sfcpart.kernels.threads import run_ranges
from sfcpart.measure.gate import Given, frozen
from sfcpart.measure.pairs import PartPairs
from sfcpart.measure.shape import has_measures
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.pieces import find_pieces

__all__ = ["CellSums", "FaceSums", "sum_cells"]

_NONE = np.zeros(0)


@dataclass(frozen=True, eq=False)
class FaceSums:
    """What needs the cell graph; all but `pairs` are (n_parts,)."""

    cut_faces: Int64Array
    cut_measure: FloatArray
    boundary_faces: Int64Array
    boundary_measure: FloatArray
    pieces: Int64Array
    largest_piece: Int64Array
    pairs: PartPairs


@dataclass(frozen=True, eq=False)
class CellSums:
    """What is summed over the cells of each part; `low` and `high` box their centres.

    `measure` is None where the measures of the cells are not known.
    """

    cells: Int64Array
    weight: FloatArray
    measure: FloatArray | None
    limit_weight: FloatArray
    low: FloatArray
    high: FloatArray
    faces: FaceSums | None


def sum_cells(mesh: Mesh, graph: CellGraph | None, partition: Partition, given: Given) -> CellSums:
    """Run the passes."""
    cell_part = frozen(partition.cell_part)
    cut_count, cut_measure = _cuts(graph, cell_part)
    values = (
        _NONE if given.weight is None else given.weight,
        mesh.measures if has_measures(mesh) else _NONE,
        _NONE if given.limit_weight is None else given.limit_weight,
        cut_measure,
        _NONE if graph is None else graph.boundary_measure,
    )
    counts = (cut_count, np.zeros(0, np.int32) if graph is None else graph.boundary_count)
    cells, value, count, low, high = sum_parts(
        cell_part,
        partition.n_parts,
        tuple(frozen(array) for array in values),
        tuple(frozen(array) for array in counts),
        frozen(mesh.centers),
    )
    faces = None
    if graph is not None:
        faces = _face_sums(graph, cell_part, cut_count, value[:, 3:], count)
    weight = cells.astype(np.float64) if given.weight is None else value[:, 0]
    measure = value[:, 1] if has_measures(mesh) else None
    return CellSums(cells, weight, measure, value[:, 2], low, high, faces)


def _cuts(graph: CellGraph | None, cell_part: Int32Array) -> tuple[Int32Array, FloatArray]:
    """Count and measure the cut faces of each cell (nothing without faces)."""
    if graph is None:
        return np.zeros(0, np.int32), _NONE
    cut_count = np.empty(graph.n_cells, np.int32)
    cut_measure = np.empty(graph.n_cells)
    run_ranges(
        count_cuts,
        graph.n_cells,
        graph.indptr,
        graph.indices,
        graph.data,
        cell_part,
        cut_count,
        cut_measure,
    )
    return cut_count, cut_measure


def _face_sums(
    graph: CellGraph,
    cell_part: Int32Array,
    cut_count: Int32Array,
    measures: FloatArray,
    counts: Int64Array,
) -> FaceSums:
    """Gather what needs faces: pairs of parts and pieces beside the sums."""
    cut_faces = np.ascontiguousarray(counts[:, 0])
    pairs = PartPairs.from_cuts(
        cut_count,
        cut_faces,
        indptr=graph.indptr,
        indices=graph.indices,
        cell_part=cell_part,
    )
    pieces, largest = _pieces(graph, cell_part, len(cut_faces))
    return FaceSums(cut_faces, measures[:, 0], counts[:, 1], measures[:, 1], pieces, largest, pairs)


def _pieces(graph: CellGraph, cell_part: Int32Array, n_parts: int) -> tuple[Int64Array, Int64Array]:
    """Count connected components inside each part, and the cells of the largest."""
    pieces, largest = np.zeros((2, n_parts), np.int64)
    found = find_pieces(GraphSlice.whole(graph), cell_part)
    cell, size = found.counted(GraphSlice.whole(graph))
    np.add.at(pieces, cell_part[cell], 1)
    np.maximum.at(largest, cell_part[cell], size)
    return pieces, largest
