"""Which foreign parts reach each cell within some layers, over ranks.

How: parts are spread over the cell graph, or from cells to points and back, layer by layer; what
cells and points of several ranks gathered is exchanged after each layer.
Cost: O(layers x entries); a layer sends the lists of the ghosts (or of the points on the rim of the
slice, there and back): 8 bytes each and 4 a part in them.
"""

from __future__ import annotations

from typing import TypeAlias

import numpy as np

from sfcpart.dtypes import OFFSET, PART, BoolArray, Int32Array, Int64Array, IntArray, index_dtype
from sfcpart.kernels.threads import run_ranges
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.meeting import shared_points
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import block_bounds, dealing, owner_of, take_ragged

__all__ = ["Lists", "no_lists", "over_faces", "over_points"]

Lists: TypeAlias = tuple[Int64Array, Int32Array]
"""Parts by row, CSR, ascending in a row."""


def no_lists(n_rows: int) -> Lists:
    """Return a list of no parts for each row."""
    return np.zeros(n_rows + 1, OFFSET), np.empty(0, PART)


def over_faces(graph: GraphSlice, cell_part: Int32Array, layers: int) -> Lists:
    """Return per local cell the foreign parts within `layers` faces (collective)."""
    all_part = graph.extend(cell_part).view()
    all_part.flags.writeable = False  # one array type, so that kernels compile once
    lists = no_lists(graph.n_local)
    for layer in range(layers):
        known = _joined(lists, graph.fetch_ragged(*lists)) if layer else lists
        lists = _spread(graph.indptr, graph.indices, cell_part, all_part, known)
    return lists


def over_points(held: MeshSlice, cell_part: Int32Array, layers: int) -> Lists:
    """Return per local cell the foreign parts within `layers` steps over shared points."""
    mesh = held.mesh
    n_cells, n_points = mesh.n_cells, mesh.n_points
    point_indptr, point_cell = _cells_of_points(mesh.indptr, mesh.indices, n_points)
    no_part = np.full(n_points, -1, PART)
    lists = no_lists(n_cells)
    for _ in range(layers):
        at_point = _spread(point_indptr, point_cell, no_part, cell_part, lists)
        at_point = _met(held, shared_points(held), at_point)
        lists = _spread(mesh.indptr, mesh.indices, cell_part, no_part, at_point)
    return lists


def _met(held: MeshSlice, shared: BoolArray, lists: Lists) -> Lists:
    """Unite the lists of points that several ranks hold; they meet at the block of the point."""
    rim = np.flatnonzero(shared)
    gid = np.asarray(held.global_points(rim), np.int64)
    way = dealing(held.comm, owner_of(gid, block_bounds(held.n_points, held.comm.size)))
    point = way.forward(gid)
    indptr, part = way.forward_ragged(*take_ragged(*lists, rim))
    pair = np.stack([np.repeat(point, np.diff(indptr)), part], axis=1)
    pair = np.unique(pair, axis=0)
    known, start = np.unique(pair[:, 0], return_index=True)
    united = np.append(start, len(pair)).astype(OFFSET)
    rows = take_ragged(united, pair[:, 1].astype(PART), np.searchsorted(known, point))
    back = way.back_ragged(*rows)
    if not len(rim):
        return lists
    row = np.arange(len(shared))
    row[rim] = len(shared) + np.arange(len(rim))
    return take_ragged(*_joined(lists, back), row)


def _joined(first: Lists, second: Lists) -> Lists:
    """Put the rows of two lists one after the other."""
    indptr = np.concatenate([first[0], first[0][-1] + second[0][1:]])
    return indptr, np.concatenate([first[1], second[1]])


def _cells_of_points(
    indptr: Int64Array, indices: IntArray, n_points: int
) -> tuple[Int64Array, IntArray]:
    """Turn "points of each cell" into "cells of each point"."""
    from sfcpart.kernels.halo import rows_of_columns

    point_indptr = np.zeros(n_points + 1, OFFSET)
    point_cell = np.empty(len(indices), index_dtype(len(indptr) - 1))
    rows_of_columns(indptr, indices, point_indptr, point_cell)
    return point_indptr, point_cell


def _spread(
    indptr: Int64Array,
    indices: IntArray,
    row_part: Int32Array,
    column_part: Int32Array,
    lists: Lists,
) -> Lists:
    """Collect, per row, the parts at its columns and those that already reach them."""
    from sfcpart.kernels.halo import reach

    n_rows = len(indptr) - 1
    to_indptr = np.zeros(n_rows + 1, OFFSET)
    relation = (indptr, indices, row_part, column_part, *lists)
    nothing = np.empty(0, PART)
    capacity = 64
    while max(run_ranges(reach, n_rows, *relation, to_indptr, nothing, capacity)) > capacity:
        capacity *= 4
    np.cumsum(to_indptr, out=to_indptr)
    to_part = np.empty(int(to_indptr[-1]), PART)
    if len(to_part):
        run_ranges(reach, n_rows, *relation, to_indptr, to_part, capacity)
    return to_indptr, to_part
