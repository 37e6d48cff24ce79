"""The cell graph: which cells share a face, and how large that face is."""

from __future__ import annotations

from dataclasses import dataclass

from sfcpart.dtypes import FloatArray, Int32Array, Int64Array, IntArray

__all__ = ["CellGraph"]


@dataclass(frozen=True, eq=False)
class CellGraph:
    """Cells joined by shared faces, in CSR form (scipy's words), symmetric, no self-loops.

    Row i lists the neighbours of cell i in ascending order. Two cells that share several faces
    have one entry for each face, so that counting entries counts faces. Where more than two
    cells meet at one face (a non-manifold surface) each pair of them is joined.

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
