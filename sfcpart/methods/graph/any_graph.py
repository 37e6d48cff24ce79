"""Any symmetric sparse matrix as an integer-weighted graph, and an order with near neighbours."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array
from sfcpart.errors import InputError, WeightError
from sfcpart.graph import CellGraph
from sfcpart.methods.graph.cell_problem import permuted
from sfcpart.methods.graph.coarsen import WeightedGraph

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

__all__ = ["graph_of_matrix", "in_walk_order"]

BITS = 20
"""Fractional edge weights keep this many bits of the largest."""

MOST = 1 << 60
"""Largest sum of vertex weights: four times it still fits an int64."""

MOST_EDGES = 1 << 53
"""Largest sum of edge weights: losses times 256 still fit."""


def graph_of_matrix(adjacency: Any, vertex_weight: ArrayLike | None) -> WeightedGraph:
    """Check a matrix (or CellGraph) and weights, and cast them.

    Raises
    ------
    InputError, WeightError
        See `split_graph`.
    """
    from scipy.sparse import csr_array, issparse

    given: Any = adjacency
    if isinstance(adjacency, CellGraph):
        indices = adjacency.indices.astype(np.int32, copy=False)
        weight = _vertex_weight(vertex_weight, adjacency.n_cells)
        return WeightedGraph(adjacency.indptr, indices, np.ones(len(indices), np.int64), weight)
    if not isinstance(given, csr_array) and not issparse(adjacency):
        raise InputError(
            f"adjacency is {type(adjacency).__name__}; wanted a sparse matrix or array of scipy"
        )
    if given.ndim != 2 or given.shape[0] != given.shape[1]:
        raise InputError(f"adjacency has shape {given.shape}; wanted a square matrix")
    matrix: Any = csr_array(given)
    matrix = csr_array(
        (_edge_weight(matrix.data), matrix.indices, matrix.indptr), shape=matrix.shape, copy=True
    )
    matrix.sum_duplicates()
    _check_symmetric(matrix)
    row = np.repeat(np.arange(matrix.shape[0]), np.diff(matrix.indptr))
    keep = (matrix.data > 0) & (row != matrix.indices)
    count = np.bincount(row[keep], minlength=matrix.shape[0])
    return WeightedGraph(
        np.concatenate([[0], np.cumsum(count)]).astype(np.int64),
        matrix.indices[keep].astype(np.int32),
        matrix.data[keep],
        _vertex_weight(vertex_weight, matrix.shape[0]),
    )


def _edge_weight(data: Array) -> Int64Array:
    """Cast edge weights to integers."""
    if data.dtype.kind in "iub":
        weight = data.astype(np.int64)
    elif data.dtype.kind == "f" and np.all(np.isfinite(data)):
        whole = bool(np.all(data == np.rint(data))) and float(np.abs(data).max(initial=0)) < 2**40
        scale = 1.0 if whole else (1 << BITS) / max(float(data.max(initial=0.0)), 1e-300)
        weight = np.where(data > 0, np.maximum(np.rint(data * scale), 1), np.rint(data * scale))
        weight = weight.astype(np.int64)
    else:
        raise WeightError(f"edge weights are {data.dtype}; wanted finite real numbers >= 0")
    if np.any(data < 0):
        bad = int(np.flatnonzero(data < 0)[0])
        raise WeightError(f"edge weight {bad} is {data[bad]}; wanted numbers >= 0")
    if float(weight.sum(dtype=np.float64)) > MOST_EDGES:
        raise WeightError("edge weights sum to more than 2^53; divide them by a common factor")
    return weight


def _vertex_weight(values: ArrayLike | None, n: int) -> Int64Array:
    """Check and cast vertex weights."""
    if values is None:
        return np.ones(n, np.int64)
    array = np.asarray(values)
    if array.shape != (n,):
        raise WeightError(f"vertex_weight has shape {array.shape}; wanted ({n},)")
    if array.dtype.kind not in "iub":
        if array.dtype.kind != "f" or not np.all(array == np.rint(array)):
            raise WeightError(f"vertex_weight is {array.dtype}; wanted whole numbers >= 0")
        if float(np.abs(array).max(initial=0)) > MOST:
            raise WeightError("vertex_weight exceeds 2^60; divide by a common factor")
    if n and array.min() < 0:
        bad = int(np.flatnonzero(array < 0)[0])
        raise WeightError(f"vertex_weight[{bad}] is {array[bad]}; wanted whole numbers >= 0")
    if float(array.sum(dtype=np.float64)) > MOST:
        raise WeightError("vertex_weight sums to more than 2^60; divide by a common factor")
    return array.astype(np.int64)


def _check_symmetric(matrix: Any) -> None:
    """Refuse a matrix that differs from its transpose, naming an entry."""
    other = matrix.T.tocsr()
    other.sort_indices()
    if (
        np.array_equal(matrix.indptr, other.indptr)
        and np.array_equal(matrix.indices, other.indices)
        and np.array_equal(matrix.data, other.data)
    ):
        return
    differs = (matrix - other).tocoo()
    where = np.flatnonzero(differs.data)
    if len(where):
        i, j = int(differs.coords[0][where[0]]), int(differs.coords[1][where[0]])
        raise InputError(f"adjacency is not symmetric at ({i}, {j}); pass A + A.T or its maximum")


def in_walk_order(graph: WeightedGraph) -> tuple[WeightedGraph, Int32Array]:
    """Renumber by a breadth-first walk; return the graph and the new number of each vertex."""
    from scipy.sparse import csr_array
    from scipy.sparse.csgraph import reverse_cuthill_mckee

    pattern = csr_array(
        (np.ones(len(graph.indices), np.int8), graph.indices, graph.indptr),
        shape=(graph.n, graph.n),
    )
    if graph.n == 0:
        return graph, np.zeros(0, np.int32)
    order = reverse_cuthill_mckee(pattern, symmetric_mode=True).astype(np.int64)
    place = np.empty(graph.n, np.int32)
    place[order] = np.arange(graph.n, dtype=np.int32)
    return permuted(graph, order, place), place
