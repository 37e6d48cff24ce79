"""The cell graph on many ranks: rows of the cells that a rank holds, and the ghosts beside them.

Faces are matched on each rank first; those that may have their other side elsewhere are routed
(`meeting`). Rows, their order and the measures are those of the graph of the whole mesh, bit for
bit. Cost beyond that of a whole mesh: what `meeting` sends, 8 bytes a ghost to set up, and one
pass over the rows where faces were found elsewhere.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.comm.base import Comm
from sfcpart.dtypes import (
    COORDINATE,
    GID,
    OFFSET,
    Array,
    FloatArray,
    Int32Array,
    Int64Array,
    IntArray,
    index_dtype,
)
from sfcpart.errors import MeshError
from sfcpart.kernels.threads import run_ranges
from sfcpart.mesh.kinds import TETRA
from sfcpart.slices.exchange import Lane, open_lane, pack
from sfcpart.slices.lists import ExchangeLists
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import take_ragged

if TYPE_CHECKING:
    from sfcpart.graph import CellGraph

__all__ = ["GraphSlice", "graph_slice"]


@dataclass(frozen=True, eq=False)
class GraphSlice:
    """Rows of the cell graph for the cells of one rank (arrays read-only).

    Cells are numbered locally: first the `n_local` owned ones, then the ghosts, which are the
    neighbours that other ranks own, by global number. Rows are those of the whole graph in their
    order (by global number of the neighbour, then measure). One rank has no ghosts.

    Attributes
    ----------
    comm : Comm
    rank_first : (size + 1,) int64
        First cell of every rank, and the number of all cells.
    indptr : (n_local + 1,) int64
    indices : (n_entries,) int32 or int64
        Local numbers.
    data : (n_entries,) float64
        Measures of faces.
    boundary_count : (n_local,) int32
    boundary_measure : (n_local,) float64
    ghost_gid : (n_ghost,) int64, ascending
    lists : ExchangeLists
        Who sends which cells to whom.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.mesh.mesh import Mesh
    >>> from sfcpart.slices.mesh_slice import cut_mesh
    >>> strip = Mesh.from_faces([[0, 1], [1, 2]], [2.0, 5.0], [[0, 0], [1, 0], [2, 0]], [1] * 3)
    >>> def act(comm):
    ...     graph = graph_slice(cut_mesh(strip, comm))
    ...     return graph.indices.tolist(), graph.ghost_gid.tolist()
    >>> run_ranks(2, act)
    [([1], [1]), ([2, 1, 0], [0])]
    """

    comm: Comm
    rank_first: Int64Array
    indptr: Int64Array
    indices: IntArray
    data: FloatArray
    boundary_count: Int32Array
    boundary_measure: FloatArray
    ghost_gid: Int64Array
    lists: ExchangeLists
    _lanes: dict[tuple[Any, ...], Lane] = field(default_factory=dict, init=False, repr=False)

    @classmethod
    def whole(cls, graph: CellGraph) -> GraphSlice:
        """Return a whole graph as the slice of the only rank."""
        comm, first = SerialComm(), np.array([0, graph.n_cells], GID)
        rows = (graph.indptr, graph.indices, graph.data)
        boundary = (graph.boundary_count, graph.boundary_measure)
        return _with_lists(comm, first, (*rows, *boundary), np.zeros(0, GID))

    @property
    def n_local(self) -> int:
        """Number of cells owned here."""
        return len(self.indptr) - 1

    @property
    def n_ghost(self) -> int:
        """Number of neighbours that other ranks own."""
        return len(self.ghost_gid)

    @property
    def first_gid(self) -> int:
        """Global number of this rank's first cell."""
        return int(self.rank_first[self.comm.rank])

    @property
    def n_cells(self) -> int:
        """Number of cells of the whole mesh."""
        return int(self.rank_first[-1])

    def gid_of(self, cell: IntArray) -> Int64Array:
        """Return the global numbers of local ones, of any shape."""
        cell = np.asarray(cell, GID)
        if not self.n_ghost:
            return cell + self.first_gid
        ghost = self.ghost_gid[np.maximum(cell - self.n_local, 0)]
        return np.where(cell < self.n_local, cell + self.first_gid, ghost)

    def fetch(self, values: Array) -> Array:
        """Return the rows of the ghosts from the ranks that own them (collective).

        Parameters
        ----------
        values : (n_local, ...) array of a fixed-size dtype
            The same dtype and trailing shape on all ranks.

        Returns
        -------
        (n_ghost, ...) array

        Notes
        -----
        One message to and from each rank with ghosts here or that has some of this rank's.

        Examples
        --------
        >>> from sfcpart.graph import cell_graph
        >>> from sfcpart.mesh.mesh import Mesh
        >>> pair = Mesh.from_faces([[0, 1]], [1.0], [[0, 0], [1, 0]], [1, 1])
        >>> GraphSlice.whole(cell_graph(pair)).fetch(np.zeros(2)).shape
        (0,)
        """
        form = (values.dtype, values.shape[1:])
        lane = self._lanes.get(form)
        if lane is None:
            lane = open_lane("forward", values, plan=self.lists, comm=self.comm)
            self._lanes[form] = lane
        pack(values, self.lists.send, lane.sent)
        lane.link.start()
        lane.link.finish()
        return lane.received.copy()

    def fetch_ragged(self, indptr: Int64Array, data: Array) -> tuple[Int64Array, Array]:
        """Return rows of different lengths (CSR over owned cells) of the ghosts (collective).

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> from sfcpart.mesh.mesh import Mesh
        >>> from sfcpart.slices.mesh_slice import cut_mesh
        >>> pair = Mesh.from_faces([[0, 1]], [1.0], [[0, 0], [1, 0]], [1, 1])
        >>> def act(comm):
        ...     graph = graph_slice(cut_mesh(pair, comm))
        ...     return graph.fetch_ragged(np.array([0, 2]), np.array([comm.rank] * 2))[1].tolist()
        >>> run_ranks(2, act)
        [[1, 1], [0, 0]]
        """
        size = self.fetch(np.diff(indptr))
        start, sent = take_ragged(indptr, data, self.lists.send)
        rows = [sent[:0]] * self.comm.size
        for rank, lo, hi in self.lists.targets():
            rows[rank] = sent[start[lo] : start[hi]]
        came = np.concatenate(self.comm.alltoall(rows))
        return np.concatenate(([0], np.cumsum(size))).astype(OFFSET), came

    def extend(self, values: Array) -> Array:
        """Return the rows of owned cells and ghosts, (n_local + n_ghost, ...) (collective).

        Without ghosts these are `values` themselves.

        Examples
        --------
        >>> from sfcpart.comm import run_ranks
        >>> from sfcpart.mesh.mesh import Mesh
        >>> from sfcpart.slices.mesh_slice import cut_mesh
        >>> pair = Mesh.from_faces([[0, 1]], [1.0], [[0, 0], [1, 0]], [1, 1])
        >>> run_ranks(2, lambda comm: graph_slice(cut_mesh(pair, comm)).extend(
        ...     np.array([comm.rank])).tolist())
        [[0, 1], [1, 0]]
        """
        ghost = self.fetch(values)
        return np.concatenate([values, ghost]) if len(ghost) else values


def graph_slice(held: MeshSlice) -> GraphSlice:
    """Join the cells of a mesh that share a face (collective), kept with the mesh.

    Parameters
    ----------
    held : MeshSlice

    Returns
    -------
    GraphSlice

    Raises
    ------
    MeshError
        On all ranks, if the mesh is known by its centres only, or one rank has 2**30 points or
        faces of cells or more.

    Notes
    -----
    O(faces); see `sfcpart.graph.cell_graph` for what counts as a shared face.

    Examples
    --------
    >>> from sfcpart.mesh.mesh import Mesh
    >>> pair = Mesh.from_faces([[0, 1]], [1.0], [[0, 0], [1, 0]], [1, 1])
    >>> graph_slice(MeshSlice.whole(pair)).indices.tolist()
    [1, 0]
    """
    return held.mesh.keep("graph slice", lambda: _build(held))


def _build(held: MeshSlice) -> GraphSlice:
    """Choose by what the mesh is made of."""
    mesh, error = held.mesh, None
    if mesh.faces is None and mesh.points is None:
        error = MeshError(
            "the mesh is known by its cell centres only, which tell no faces; "
            "wanted cells with points, or faces (Mesh.from_faces)"
        )
    held.comm.check(error)
    rows, ghost_gid = _from_points(held) if mesh.faces is None else _from_faces(held)
    return _with_lists(held.comm, held.rank_first, rows, ghost_gid)


def _with_lists(
    comm: Comm, first: Int64Array, rows: tuple[Any, ...], ghost_gid: Int64Array
) -> GraphSlice:
    """Find who sends what, and freeze."""
    lists = ExchangeLists.of_blocks(ghost_gid, first=first, comm=comm)
    for array in rows:
        if array.flags.writeable:
            array.flags.writeable = False
    return GraphSlice(comm, first, *(*rows, ghost_gid, lists))


def _from_points(held: MeshSlice) -> tuple[tuple[Array, ...], Int64Array]:
    """Match the faces of cells, here and then elsewhere."""
    from sfcpart.mesh.adjacency import join_matched, match_cells
    from sfcpart.slices.meeting import FaceRows, meet_faces, shared_points

    shared, error, matching = shared_points(held), None, None
    is_tetra = np.array([bool((held.mesh.kind == TETRA).all())])
    all_tetra = bool(held.comm.allreduce(is_tetra, "min")[0])
    try:
        matching = match_cells(held.mesh, on_rim=shared, all_tetra=all_tetra)
    except MeshError as caught:
        error = caught
    held.comm.check(error)
    assert matching is not None
    rim = matching.rim
    cell = matching.cell_of(rim.slot)
    corner = np.asarray(held.global_points(rim.corner), GID)
    faces = FaceRows(held.first_gid + cell, matching.measure_of(rim.slot), rim.indptr, corner)
    met = meet_faces(faces, held.comm)
    matching.forget(rim.slot[met.row])
    found = met.other_gid >= 0
    row, gid, measure = cell[met.row[found]], met.other_gid[found], met.measure[found]
    rows = join_matched(matching)
    del matching  # 20 bytes a face of a cell, before the rows are written once more
    return _with_entries(rows, row, gid, measure, first=held.first_gid)


def _with_entries(
    rows: tuple[Any, ...], row: Array, gid: Int64Array, measure: FloatArray, *, first: int
) -> tuple[tuple[Array, ...], Int64Array]:
    """Add entries to the rows of local cells; return them and the cells that are not local."""
    from sfcpart.kernels.mesh.face_rows import merge_rows

    if not len(row):
        return rows, np.zeros(0, GID)
    indptr, indices, data, boundary_count, boundary_measure = rows
    n = len(indptr) - 1
    ghost_gid = np.unique(gid[(gid < first) | (gid >= first + n)])
    n_low = int(np.searchsorted(ghost_gid, first))
    # places among all cells known here, ascending by global number: low ghosts, owned, high ones
    place = np.where(
        gid < first,
        np.searchsorted(ghost_gid, gid),
        np.where(gid < first + n, gid - first + n_low, np.searchsorted(ghost_gid, gid) + n),
    )
    by_row = np.lexsort((measure, place, row))
    added = np.concatenate(([0], np.cumsum(np.bincount(row, minlength=n)))).astype(OFFSET)
    more = (added, place[by_row], measure[by_row], n_low)
    merged = np.empty(len(indices) + len(row), index_dtype(n + len(ghost_gid)))
    measures = np.empty(len(merged), COORDINATE)
    run_ranges(merge_rows, n, indptr, indices, data, *more, merged, measures)
    return (indptr + added, merged, measures, boundary_count, boundary_measure), ghost_gid


def _to_local(indices: IntArray, n_low: int, n: int) -> None:
    """Turn places among all known cells into local numbers; those of high ghosts are the same."""
    low, owned = indices < n_low, (indices >= n_low) & (indices < n_low + n)
    indices[low] += n
    indices[owned] -= n_low


def _from_faces(held: MeshSlice) -> tuple[tuple[Array, ...], Int64Array]:
    """Sort the faces that the mesh was given; those of the cells here are here."""
    from sfcpart.mesh.adjacency import sort_faces

    assert held.mesh.faces is not None
    cell, measure = held.mesh.faces.cell, held.mesh.faces.measure
    first, n = held.first_gid, held.n_local
    foreign = (cell >= first + n) | ((cell < first) & (cell >= 0))
    ghost_gid = np.unique(cell[foreign]).astype(GID)
    if not first and not len(ghost_gid):
        return sort_faces(cell, measure, n), ghost_gid
    n_low = int(np.searchsorted(ghost_gid, first))
    place = cell + np.int64(n_low - first)
    among = np.searchsorted(ghost_gid, cell[foreign])
    place[foreign] = np.where(among < n_low, among, among + n)
    place[cell < 0] = -1
    indptr, indices, data, count, size = sort_faces(place, measure, n + len(ghost_gid))
    mine = slice(n_low, n_low + n)
    lo, hi = int(indptr[n_low]), int(indptr[n_low + n])
    indices, data = indices[lo:hi].copy(), data[lo:hi].copy()
    _to_local(indices, n_low, n)
    rows = (np.asarray(indptr[n_low : n_low + n + 1] - lo, OFFSET), indices, data)
    return (*rows, count[mine].copy(), np.asarray(size[mine].copy(), COORDINATE)), ghost_gid
