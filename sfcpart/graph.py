"""The cell graph: which cells share a face, and how large that face is.

Faces are matched by the set of their distinct corners, exactly: a counting sort by smallest
corner, then a sort of the few faces of each bucket (`kernels/faces.py`). O(faces) in time as long
as few faces share their smallest corner, O(faces log faces) at worst; deterministic for any number
of threads.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import (
    COORDINATE,
    OFFSET,
    Array,
    FloatArray,
    Int32Array,
    Int64Array,
    IntArray,
    index_dtype,
)
from sfcpart.errors import MeshError
from sfcpart.kernels.threads import n_threads, run_ranges

if TYPE_CHECKING:
    from sfcpart.mesh.mesh import Mesh

__all__ = ["CellGraph", "cell_graph", "components"]

_MOST_BLOCKS = 8
_BUCKET_CHUNKS = 64


@dataclass(frozen=True, eq=False)
class CellGraph:
    """Cells joined by shared faces, in CSR form (scipy's words), symmetric, no self-loops.

    Row i lists the neighbours of cell i in ascending order (equal neighbours by measure). Two
    cells that share several faces have one entry for each face, so that counting entries counts
    faces. Where more than two cells meet at one face (a non-manifold surface) each pair of them
    is joined.

    Attributes
    ----------
    indptr : (n_cells + 1,) int64
    indices : (n_entries,) int32 or int64
        Neighbouring cell of each entry.
    data : (n_entries,) float64
        Measure of the shared face (area in 3-D, length in 2-D), bitwise equal in both directions.
    boundary_count : (n_cells,) int32
        Faces of each cell that no other cell shares.
    boundary_measure : (n_cells,) float64
        Their total measure.
    """

    indptr: Int64Array
    indices: IntArray
    data: FloatArray
    boundary_count: Int32Array
    boundary_measure: FloatArray

    @property
    def n_cells(self) -> int:
        """Number of cells."""
        return len(self.indptr) - 1

    @property
    def n_faces(self) -> int:
        """Number of interior faces (pairs of cells that meet)."""
        return len(self.indices) // 2

    def to_scipy(self) -> Any:
        """Return the graph as a scipy.sparse.csr_array of shape (n_cells, n_cells).

        Returns
        -------
        scipy.sparse.csr_array
            Over the same arrays. Cells that share several faces have several entries, which
            scipy adds up (`sum_duplicates`) where an algorithm asks for it.

        Examples
        --------
        >>> from sfcpart.mesh.mesh import Mesh
        >>> strip = Mesh.from_faces([[0, 1], [1, 2]], [2.0, 5.0], [[0, 0], [1, 0], [2, 0]], [1] * 3)
        >>> cell_graph(strip).to_scipy().toarray().tolist()
        [[0.0, 2.0, 0.0], [2.0, 0.0, 5.0], [0.0, 5.0, 0.0]]
        """
        from scipy.sparse import csr_array

        shape = (self.n_cells, self.n_cells)
        return csr_array((self.data, self.indices, self.indptr), shape=shape)


def cell_graph(mesh: Mesh) -> CellGraph:
    """Join the cells of a mesh that share a face.

    Parameters
    ----------
    mesh : Mesh
        Meshes made of faces give them as they are; meshes of bare centres have none.

    Returns
    -------
    CellGraph
        Kept with the mesh: a second call costs nothing.

    Raises
    ------
    MeshError
        If the mesh is known by its centres only, or has 2**30 faces of cells or more.

    Notes
    -----
    Faces match if they have the same distinct corners; a collapsed side (fewer distinct corners
    than a face needs, or both sides of it in one cell) is no face. A quad beside two triangles
    does not match, nor do faces whose points merely coincide (`Mesh.with_points_merged`).
    The measure of a face is its length or area, for more than three corners the norm of its
    vector area. O(faces); about 20 bytes a face of each cell beyond the result.

    Examples
    --------
    >>> from sfcpart.mesh.mesh import Mesh
    >>> points = [[0, 0], [1, 0], [2, 0], [0, 3], [1, 3], [2, 3]]
    >>> graph = cell_graph(Mesh.from_arrays(points, {"quad": [[0, 1, 4, 3], [1, 2, 5, 4]]}))
    >>> graph.indptr.tolist(), graph.indices.tolist(), graph.data.tolist()
    ([0, 1, 2], [1, 0], [3.0, 3.0])
    >>> graph.boundary_count.tolist(), graph.boundary_measure.tolist()
    ([3, 3], [5.0, 5.0])
    """
    return mesh.keep("graph", lambda: _build(mesh))


def components(graph: CellGraph) -> tuple[int, Int32Array]:
    """Find the connected components of the cell graph.

    Parameters
    ----------
    graph : CellGraph

    Returns
    -------
    count : int
    label : (n_cells,) int32
        Component of each cell, numbered by their first cells.

    Notes
    -----
    O(cells + faces), by scipy.sparse.csgraph.

    Examples
    --------
    >>> from sfcpart.mesh.mesh import Mesh
    >>> mesh = Mesh.from_faces([[0, 2]], [1.0], [[0, 0], [5, 0], [1, 0]], [1.0] * 3)
    >>> count, label = components(cell_graph(mesh))
    >>> count, label.tolist()
    (2, [0, 1, 0])
    """
    from scipy.sparse.csgraph import connected_components

    count, label = connected_components(graph.to_scipy(), directed=False)
    first = np.full(count, graph.n_cells, OFFSET)
    np.minimum.at(first, label, np.arange(graph.n_cells))
    rank = np.empty(count, np.int32)
    rank[np.argsort(first)] = np.arange(count, dtype=np.int32)
    return int(count), rank[label]


def _build(mesh: Mesh) -> CellGraph:
    """Choose by what the mesh is made of."""
    if mesh.faces is not None:
        return _from_faces(mesh)
    if mesh.points is None:
        raise MeshError(
            "the mesh is known by its cell centres only, which tell no faces; "
            "wanted cells with points, or faces (Mesh.from_faces)"
        )
    return _from_cells(mesh)


@dataclass(frozen=True, eq=False)
class _Slots:
    """How the faces of cells are numbered: `stride` a cell if that is one number, else `start`."""

    count: int
    stride: int
    start: Int64Array
    cell: Int32Array
    longest: int


def _number_slots(mesh: Mesh) -> _Slots:
    """Give the faces of all cells their numbers, cell by cell."""
    from sfcpart.mesh.build import most_corners
    from sfcpart.mesh.kinds import MAX_CORNERS, POLYHEDRON, kind_tables

    longest = max(most_corners(mesh), MAX_CORNERS)
    count = kind_tables().face_count[mesh.kind[0]]
    if count > 0 and (mesh.kind == mesh.kind[0]).all():
        none = np.zeros(1, np.int32)
        stride = int(count)
        return _checked(_Slots(stride * mesh.n_cells, stride, none.astype(OFFSET), none, longest))
    each = kind_tables().face_count[mesh.kind].astype(np.int32)
    free = each == 0
    if mesh.polyhedra is not None:
        longest = max(longest, int(np.diff(mesh.polyhedra.face_indptr).max()))
        each[free] = np.diff(mesh.polyhedra.cell_indptr)[free]
        free = free & (mesh.kind != POLYHEDRON)
    each[free] = np.diff(mesh.indptr)[free]
    start = np.zeros(mesh.n_cells + 1, OFFSET)
    np.cumsum(each, out=start[1:])
    cell = np.repeat(np.arange(mesh.n_cells, dtype=np.int32), each)
    return _checked(_Slots(len(cell), 0, start, cell, longest))


def _checked(slots: _Slots) -> _Slots:
    """Refuse what 30 bits cannot number."""
    from sfcpart.kernels.faces import SLOT_LIMIT

    if slots.count >= SLOT_LIMIT:
        raise MeshError(
            f"the cells have {slots.count} faces; the cell graph holds fewer than {SLOT_LIMIT}: "
            "split without measuring, or by a curve alone"
        )
    return slots


def _from_cells(mesh: Mesh) -> CellGraph:
    """Match the faces of cells."""
    from sfcpart.kernels import faces

    slots, cells = _number_slots(mesh), mesh.cell_arrays()
    entry, mate = _match(mesh, slots)
    n = mesh.n_cells
    indptr = np.zeros(n + 1, OFFSET)
    boundary_count = np.empty(n, np.int32)
    boundary_measure = np.empty(n, COORDINATE)
    run_ranges(faces.count_rows, n, slots.stride, slots.start, entry, mate, indptr, boundary_count)
    np.cumsum(indptr, out=indptr)
    indices = np.empty(indptr[-1], index_dtype(n))
    data = np.empty(indptr[-1], COORDINATE)
    run_ranges(
        faces.fill_rows,
        n,
        mesh.points,
        cells,
        slots.stride,
        slots.start,
        slots.cell,
        slots.longest,
        entry,
        mate,
        indptr,
        indices,
        data,
        boundary_measure,
    )
    return _graph(indptr, indices, data, boundary_count, boundary_measure)


def _match(mesh: Mesh, slots: _Slots) -> tuple[Int64Array, Int32Array]:
    """Return the sorted entries (one row if no groups need them) and the mate of each slot."""
    from sfcpart.kernels import faces

    cells, least = mesh.cell_arrays(), mesh.dim
    n_blocks = max(1, min(n_threads(), _MOST_BLOCKS, mesh.n_cells // 16_384))
    bounds = np.linspace(0, mesh.n_cells, n_blocks + 1).astype(OFFSET)
    count = np.zeros((n_blocks, mesh.n_points), np.int32)
    shape = (bounds, cells, least, slots.stride, slots.start, slots.longest)
    run_ranges(faces.count_faces, n_blocks, *shape, count, smallest=1)
    bucket = np.empty(mesh.n_points + 1, np.int32)
    faces.place_buckets(count, bucket)
    entry = np.empty((int(bucket[-1]), 2), np.int64)
    mate = np.empty(slots.count, np.int32)
    run_ranges(faces.fill_entries, n_blocks, *shape, count, entry, mate, smallest=1)
    del count
    marks = np.linspace(0, len(entry), _BUCKET_CHUNKS + 1)
    chunks = np.searchsorted(bucket, marks).astype(OFFSET)
    chunks[0], chunks[-1] = 0, mesh.n_points
    groups = run_ranges(
        faces.match_faces,
        _BUCKET_CHUNKS,
        chunks,
        bucket,
        cells,
        slots.stride,
        slots.start,
        slots.cell,
        slots.longest,
        entry,
        mate,
        smallest=1,
    )
    return (entry if sum(groups) else np.zeros((1, 2), np.int64)), mate


def _from_faces(mesh: Mesh) -> CellGraph:
    """Sort given faces into rows."""
    assert mesh.faces is not None
    pair, size, n = mesh.faces.cell, mesh.faces.measure, mesh.n_cells
    inner = pair[:, 1] >= 0
    a, b, w = pair[inner, 0], pair[inner, 1], size[inner]
    row, column = np.concatenate([a, b]), np.concatenate([b, a])
    both = np.concatenate([w, w])
    order = np.lexsort((both, column, row))
    indptr = np.zeros(n + 1, OFFSET)
    np.cumsum(np.bincount(row, minlength=n), out=indptr[1:])
    bare = pair[~inner, 0]
    return _graph(
        indptr,
        column[order],
        both[order],
        np.bincount(bare, minlength=n).astype(np.int32),
        np.bincount(bare, weights=size[~inner], minlength=n),
    )


def _graph(*arrays: Array) -> CellGraph:
    """Freeze the arrays."""
    for array in arrays:
        array.flags.writeable = False
    return CellGraph(*arrays)
