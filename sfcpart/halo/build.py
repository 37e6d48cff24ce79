"""Build the exchange lists: spread parts over a relation, sort the pairs of part and cell."""

from __future__ import annotations

from typing import TYPE_CHECKING, TypeAlias

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.curve import mesh_slice
from sfcpart.dtypes import OFFSET, PART, Array, Int32Array, Int64Array, IntArray, index_dtype
from sfcpart.errors import InputError, MeshError, PartitionError
from sfcpart.halo.lists import Across, Halo
from sfcpart.kernels.threads import run_ranges

if TYPE_CHECKING:
    from sfcpart.graph import CellGraph
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = ["build_halo"]

_Lists: TypeAlias = tuple[Int64Array, Int32Array]


def build_halo(
    mesh: Mesh | None,
    graph: CellGraph | None,
    partition: Partition,
    *,
    layers: int = 1,
    across: Across = "faces",
    order: IntArray | None = None,
) -> Halo:
    """Build the exchange lists of all parts.

    Parameters
    ----------
    mesh : Mesh or None
        Needed across points, and for the curve order where `order` is not given.
    graph : CellGraph or None
        Needed across faces.
    partition : Partition
        Part of each cell.
    layers : int, optional
        Steps from an owned cell that the halo reaches; 0 for no halo, which is all that a mesh
        known by its cell centres only can have.
    across : {"faces", "points"}, optional
        Whether one step crosses a shared face or any shared point.
    order : (n_cells,) integers, optional
        The cells in curve order, a permutation; by default the Hilbert order of the centres.

    Returns
    -------
    Halo

    Raises
    ------
    InputError
        If `layers`, `across` or `order` is wrong, or what they need is missing.
    MeshError
        If points are asked for and the mesh has none.
    PartitionError
        If the partition has not one part for each cell.

    Notes
    -----
    O(layers x entries) time; the result does not depend on the number of threads.

    Examples
    --------
    >>> import numpy as np
    >>> from sfcpart.graph import CellGraph
    >>> from sfcpart.partition import Partition
    >>> row = CellGraph(  # four cells in a row
    ...     indptr=np.array([0, 1, 3, 5, 6]), indices=np.array([1, 0, 2, 1, 3, 2]),
    ...     data=np.ones(6), boundary_count=np.zeros(4, np.int32), boundary_measure=np.zeros(4))
    >>> halves = Partition.from_array([0, 0, 1, 1])
    >>> halo = build_halo(None, row, halves, order=np.arange(4))
    >>> halo.halo_cells(0).tolist(), halo.send_list(1, 0).tolist()
    ([2], [0])
    """
    _check_options(layers, across)
    order = _checked_order(mesh, partition, order)
    if layers == 0:
        lists = _no_lists(partition.n_cells)
    elif across == "faces":
        lists = _across_faces(graph, partition, layers)
    else:
        lists = _across_points(mesh, partition, layers)
    return _arranged(order, partition, lists, layers=layers, across=across)


def _check_options(layers: int, across: str) -> None:
    """Refuse wrong numbers of layers and unknown ways to step."""
    if isinstance(layers, bool) or not isinstance(layers, int | np.integer) or layers < 0:
        raise InputError(f"layers is {layers!r}; wanted a whole number, 1 or more (0: no halo)")
    if across not in ("faces", "points"):
        raise InputError(f'across is {across!r}; wanted "faces" or "points"')


def _checked_order(mesh: Mesh | None, partition: Partition, order: IntArray | None) -> IntArray:
    """Return the curve order as a permutation of the cells in the narrowest dtype."""
    n_cells = partition.n_cells
    if order is None:
        if mesh is None:
            raise InputError("neither mesh nor order is given; wanted one of them for the order")
        cells = np.arange(mesh.n_cells, dtype=index_dtype(mesh.n_cells))
        order = mesh_slice(mesh, comm=SerialComm()).gather(cells)
    order = np.asarray(order)
    if order.shape != (n_cells,) or order.dtype.kind not in "iu":
        raise InputError(
            f"order is {order.dtype} of shape {order.shape}; wanted the {n_cells} cells, a "
            f"permutation of 0..{n_cells - 1}"
        )
    if n_cells and (order.min() < 0 or order.max() >= n_cells or not _all_met(order)):
        raise InputError(f"order is no permutation of 0..{n_cells - 1}; wanted every cell once")
    return np.ascontiguousarray(order, index_dtype(n_cells))


def _all_met(order: IntArray) -> bool:
    """Tell whether every row number occurs (hence once) in an array within range."""
    met = np.zeros(len(order), np.bool_)
    met[order] = True
    return bool(met.all())


def _across_faces(graph: CellGraph | None, partition: Partition, layers: int) -> _Lists:
    """Return per cell the foreign parts within `layers` faces."""
    if graph is None:
        raise InputError("graph is missing; wanted the cell graph for a halo across faces")
    if graph.n_cells != partition.n_cells:
        raise PartitionError(
            f"the partition has {partition.n_cells} cells and the graph {graph.n_cells}; "
            "wanted one part a cell"
        )
    part = partition.cell_part
    lists = _no_lists(partition.n_cells)
    for _ in range(layers):
        lists = _spread(graph.indptr, graph.indices, part, part, lists)
    return lists


def _across_points(mesh: Mesh | None, partition: Partition, layers: int) -> _Lists:
    """Return per cell the foreign parts within `layers` steps over shared points."""
    if mesh is None or mesh.points is None:
        raise MeshError('the mesh has no points; use across="faces", or a mesh with points')
    n_cells, n_points = len(mesh.kind), len(mesh.points)
    if n_cells != partition.n_cells:
        raise PartitionError(
            f"the partition has {partition.n_cells} cells and the mesh {n_cells}; "
            "wanted one part a cell"
        )
    point_indptr, point_cell = _cells_of_points(mesh.indptr, mesh.indices, n_points)
    part = partition.cell_part
    no_part = np.full(n_points, -1, PART)
    lists = _no_lists(n_cells)
    for _ in range(layers):
        at_point = _spread(point_indptr, point_cell, no_part, part, lists)
        lists = _spread(mesh.indptr, mesh.indices, part, no_part, at_point)
    return lists


def _cells_of_points(
    indptr: Int64Array, indices: IntArray, n_points: int
) -> tuple[Int64Array, IntArray]:
    """Turn "points of each cell" into "cells of each point"."""
    from sfcpart.kernels.halo import rows_of_columns

    point_indptr = np.zeros(n_points + 1, OFFSET)
    point_cell = np.empty(len(indices), index_dtype(len(indptr) - 1))
    rows_of_columns(indptr, indices, point_indptr, point_cell)
    return point_indptr, point_cell


def _no_lists(n_rows: int) -> _Lists:
    """Return a list of no parts for each row."""
    return np.zeros(n_rows + 1, OFFSET), np.empty(0, PART)


def _spread(
    indptr: Int64Array,
    indices: IntArray,
    row_part: Int32Array,
    column_part: Int32Array,
    lists: _Lists,
) -> _Lists:
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


def _arranged(
    order: IntArray, partition: Partition, lists: _Lists, *, layers: int, across: Across
) -> Halo:
    """Group the cells, sort the pairs of part and cell into the lists of both sides, freeze."""
    from sfcpart.kernels.halo import arrange

    n_parts, n_pairs = partition.n_parts, len(lists[1])
    owned_indptr, halo_indptr, sent_indptr = np.zeros((3, n_parts + 1), OFFSET)
    owned, owner = np.empty_like(order), np.empty(n_pairs, PART)
    halo, send = np.empty(n_pairs, order.dtype), np.empty(n_pairs, order.dtype)
    cells = (order, partition.cell_part, owned_indptr, owned)
    arrange(*cells, *lists, halo_indptr, halo, owner, sent_indptr, send)
    neighbour_indptr, neighbour, receive_indptr = _runs(halo_indptr, owner)
    send_indptr = _send_rows(neighbour_indptr, neighbour, receive_indptr)
    _freeze(owned_indptr, owned, halo_indptr, halo, neighbour_indptr, neighbour)
    _freeze(receive_indptr, send_indptr, send)
    return Halo(
        n_parts=n_parts,
        layers=int(layers),
        across=across,
        owned_indptr=owned_indptr,
        owned=owned,
        halo_indptr=halo_indptr,
        halo=halo,
        neighbour_indptr=neighbour_indptr,
        neighbour=neighbour,
        receive_indptr=receive_indptr,
        send_indptr=send_indptr,
        send=send,
    )


def _runs(halo_indptr: Int64Array, owner: Int32Array) -> tuple[Int64Array, Int32Array, Int64Array]:
    """Find the runs of one owner within each part's halo: its neighbours and their rows."""
    n_halo = len(owner)
    starts = np.zeros(n_halo + 1, np.bool_)
    starts[1:-1] = owner[1:] != owner[:-1]
    starts[halo_indptr] = True
    receive_indptr = np.flatnonzero(starts).astype(OFFSET)
    neighbour_indptr = np.searchsorted(receive_indptr, halo_indptr).astype(OFFSET)
    if n_halo == 0:
        return neighbour_indptr, owner, np.zeros(1, OFFSET)
    return neighbour_indptr, owner[receive_indptr[:-1]], receive_indptr


def _send_rows(
    neighbour_indptr: Int64Array, neighbour: Int32Array, receive_indptr: Int64Array
) -> Int64Array:
    """Return the rows each pair sends: the length of the mirrored pair's receive list.

    Pairs are sorted by (part, neighbour), so the mirrored ones follow from a stable sort by
    neighbour.
    """
    mirror = np.argsort(neighbour, kind="stable")
    rows = np.zeros(len(neighbour) + 1, OFFSET)
    np.cumsum(np.diff(receive_indptr)[mirror], out=rows[1:])
    return rows


def _freeze(*arrays: Array) -> None:
    """Make arrays read-only."""
    for array in arrays:
        array.flags.writeable = False
