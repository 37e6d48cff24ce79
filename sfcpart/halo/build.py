"""Build the exchange lists: spread parts over a relation, sort the pairs of part and cell."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.curve import CurveSlice, mesh_slice
from sfcpart.dtypes import IntArray, index_dtype
from sfcpart.errors import InputError, MeshError, PartitionError
from sfcpart.halo.arrange import arranged
from sfcpart.halo.lists import Across, Halo
from sfcpart.halo.reach import Lists, no_lists, over_faces, over_points
from sfcpart.partition import Partition
from sfcpart.slices.gate import agreed
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.mesh_slice import MeshSlice

if TYPE_CHECKING:
    from sfcpart.graph import CellGraph
    from sfcpart.mesh.mesh import Mesh

__all__ = ["build_halo", "build_halo_slice"]


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
    n_cells = partition.n_cells
    if order is None and mesh is None:
        raise InputError("neither mesh nor order is given; wanted one of them for the order")
    line = None if order is None else _line_of(_checked_order(order, n_cells))
    if line is None:
        assert mesh is not None
        line = mesh_slice(mesh, comm=SerialComm())
    if layers and across == "faces":
        lists = _across_faces(None if graph is None else GraphSlice.whole(graph), partition, layers)
    elif layers:
        lists = _across_points(None if mesh is None else MeshSlice.whole(mesh), partition, layers)
    else:
        lists = no_lists(n_cells)
    first = np.array([0, n_cells], np.int64)
    return arranged(line, partition, lists, rank_first=first, layers=layers, across=across)


def build_halo_slice(
    held: MeshSlice,
    graph: GraphSlice | None,
    partition: Partition,
    *,
    layers: int = 1,
    across: Across = "faces",
) -> Halo:
    """Build the exchange lists of the parts that this rank owns (collective).

    Parameters
    ----------
    held : MeshSlice
    graph : GraphSlice or None
        Needed across faces.
    partition : Partition
        Part of each cell of this rank; the number of parts is that of all ranks.
    layers, across
        As for `build_halo`.

    Returns
    -------
    Halo
        Of parts `first_part` to `first_part + n_parts - 1`: parts are owned in blocks of
        consecutive numbers (`sfcpart.slices.routing.block_bounds(n_parts, size)`). Rank after
        rank these are the rows of `build_halo` of the whole mesh.

    Raises
    ------
    InputError, MeshError, PartitionError
        On all ranks alike, as `build_halo`.

    Notes
    -----
    O(layers x entries of the slice + cells and halo of the parts owned); 24 bytes a part.

    Examples
    --------
    >>> import numpy as np
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.mesh.mesh import Mesh
    >>> from sfcpart.slices.graph_slice import graph_slice
    >>> from sfcpart.slices.mesh_slice import cut_mesh
    >>> row = Mesh.from_faces([[0, 1], [1, 2]], [1, 1], [[0, 0], [1, 0], [2, 0]], [1, 1, 1])
    >>> def act(comm):
    ...     held = cut_mesh(row, comm)
    ...     half = Partition.from_array([[0], [0, 1]][comm.rank], 2)
    ...     halo = build_halo_slice(held, graph_slice(held), half)
    ...     return halo.first_part, halo.owned.tolist(), halo.halo.tolist()
    >>> run_ranks(2, act)
    [(0, [0, 1], [2]), (1, [2], [1])]
    """
    agreed(held.comm, lambda: _check_slice(held, graph, partition, layers, across))
    line = mesh_slice(held.mesh, comm=held.comm)
    if layers and across == "faces":
        lists = _across_faces(graph, partition, layers)
    elif layers:
        lists = _across_points(held, partition, layers)
    else:
        lists = no_lists(held.n_local)
    first = held.rank_first
    return arranged(line, partition, lists, rank_first=first, layers=layers, across=across)


def _check_slice(
    held: MeshSlice, graph: GraphSlice | None, partition: Partition, layers: int, across: str
) -> None:
    """Refuse on each rank what does not fit."""
    _check_options(layers, across)
    if layers and across == "faces":
        _check_faces(graph, partition)
    elif layers:
        _check_points(held, partition)
    _check_count(partition, held.n_local, "mesh")


def _check_options(layers: int, across: str) -> None:
    """Refuse wrong numbers of layers and unknown ways to step."""
    if isinstance(layers, bool) or not isinstance(layers, int | np.integer) or layers < 0:
        raise InputError(f"layers is {layers!r}; wanted a whole number, 1 or more (0: no halo)")
    if across not in ("faces", "points"):
        raise InputError(f'across is {across!r}; wanted "faces" or "points"')


def _checked_order(order: IntArray, n_cells: int) -> IntArray:
    """Return the curve order as a permutation of the cells in the narrowest dtype."""
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


def _line_of(order: IntArray) -> CurveSlice:
    """Return a curve that meets the cells in a given order."""
    edge, received = np.array([0, len(order)]), np.array([len(order)])
    return CurveSlice(SerialComm(), order, edge, received, None)


def _across_faces(graph: GraphSlice | None, partition: Partition, layers: int) -> Lists:
    """Return per cell the foreign parts within `layers` faces."""
    return over_faces(_check_faces(graph, partition), partition.cell_part, layers)


def _check_faces(graph: GraphSlice | None, partition: Partition) -> GraphSlice:
    """Refuse a missing graph, or that of other cells."""
    if graph is None:
        raise InputError("graph is missing; wanted the cell graph for a halo across faces")
    _check_count(partition, graph.n_local, "graph")
    return graph


def _across_points(held: MeshSlice | None, partition: Partition, layers: int) -> Lists:
    """Return per cell the foreign parts within `layers` steps over shared points."""
    return over_points(_check_points(held, partition), partition.cell_part, layers)


def _check_points(held: MeshSlice | None, partition: Partition) -> MeshSlice:
    """Refuse a mesh without points, or one of other cells."""
    if held is None or held.mesh.points is None:
        raise MeshError('the mesh has no points; use across="faces", or a mesh with points')
    _check_count(partition, held.n_local, "mesh")
    return held


def _check_count(partition: Partition, n_cells: int, what: str) -> None:
    """Refuse a partition of other cells."""
    if n_cells != partition.n_cells:
        raise PartitionError(
            f"the partition has {partition.n_cells} cells and the {what} {n_cells}; "
            "wanted one part a cell"
        )
