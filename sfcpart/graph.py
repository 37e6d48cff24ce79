"""The cell graph: which cells share a face, and how large that face is.

Faces are matched by the set of their distinct corners, exactly: a counting sort by smallest
corner, then a sort of the few faces of each bucket (`sfcpart.kernels.mesh.faces`). O(faces) in time
while few faces share their smallest corner, and little more where many do; deterministic for any
number of threads.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from sfcpart.dtypes import FloatArray, Int32Array, Int64Array, IntArray

if TYPE_CHECKING:
    from sfcpart.mesh.mesh import Mesh

__all__ = ["CellGraph", "cell_graph", "components"]


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
    O(cells + faces) (`sfcpart.slices.pieces`).

    Examples
    --------
    >>> from sfcpart.mesh.mesh import Mesh
    >>> mesh = Mesh.from_faces([[0, 2]], [1.0], [[0, 0], [5, 0], [1, 0]], [1.0] * 3)
    >>> count, label = components(cell_graph(mesh))
    >>> count, label.tolist()
    (2, [0, 1, 0])
    """
    from sfcpart.slices.graph_slice import GraphSlice
    from sfcpart.slices.pieces import number_pieces

    return number_pieces(GraphSlice.whole(graph))


def _build(mesh: Mesh) -> CellGraph:
    """Take the arrays of the slice that is the whole mesh."""
    from sfcpart.slices.graph_slice import graph_slice
    from sfcpart.slices.mesh_slice import MeshSlice

    rows = graph_slice(MeshSlice.whole(mesh))
    return CellGraph(
        rows.indptr, rows.indices, rows.data, rows.boundary_count, rows.boundary_measure
    )
