"""Boundary elements and the cells that hold them.

What: the at most two lowest cells that hold all points of an element. Faces have at most two such
cells; smaller elements (a line in 3-D) may have more, and the two lowest count.
Cost: O(entries of the cells), then O(elements).
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import OFFSET, Array, Int64Array
from sfcpart.kernels.threads import run_ranges
from sfcpart.mesh.mesh import BoundaryGroup, Mesh

__all__ = ["cells_of_elements", "elements_of_cells", "lowest_cells"]


def cells_of_elements(mesh: Mesh) -> tuple[Int64Array, ...]:
    """Return for each boundary group the two lowest cells at each element, kept on the mesh.

    Parameters
    ----------
    mesh : Mesh

    Returns
    -------
    tuple of (n_elements, 2) int64
        -1 where there is none.

    Examples
    --------
    >>> mesh = Mesh.from_arrays(
    ...     [[0, 0], [1, 0], [1, 1], [0, 1]],
    ...     {"triangle": [[0, 1, 2], [0, 2, 3]], "line": [[0, 1], [2, 0], [1, 3]]})
    >>> cells_of_elements(mesh)[0].tolist()
    [[0, -1], [0, 1], [-1, -1]]
    """
    return mesh.keep("cells of boundary elements", lambda: _cells_of_elements(mesh))


def _cells_of_elements(mesh: Mesh) -> tuple[Int64Array, ...]:
    """Find them for all groups."""
    if not mesh.boundary:
        return ()
    used = np.zeros(mesh.n_points, np.bool_)
    for group in mesh.boundary:
        used[group.indices] = True
    relation = _cells_at_points(mesh, used)
    return tuple(lowest_cells(mesh, group, relation) for group in mesh.boundary)


def _cells_at_points(mesh: Mesh, used: Array) -> tuple[Int64Array, Int64Array]:
    """Return the cells at each used point, ascending (CSR)."""
    entry = np.flatnonzero(used[mesh.indices])
    cell = np.searchsorted(mesh.indptr, entry, side="right") - 1
    point = mesh.indices[entry]
    counts = np.bincount(point, minlength=mesh.n_points)
    indptr = np.concatenate([[0], np.cumsum(counts)]).astype(OFFSET)
    return indptr, cell[np.argsort(point, kind="stable")].astype(np.int64)


def lowest_cells(
    mesh: Mesh, group: BoundaryGroup, relation: tuple[Int64Array, Int64Array]
) -> Int64Array:
    """Return up to two cells that hold each element, (n, 2), -1 where there is none."""
    from sfcpart.kernels.mesh.elements import cells_with_points

    found = np.full((len(group.kind), 2), -1, np.int64)
    rows = (group.indptr, group.indices, *relation, mesh.indptr, mesh.indices)
    run_ranges(cells_with_points, len(found), *rows, found)
    return found


def elements_of_cells(
    mesh: Mesh, lo: int, hi: int, *, point_gid: Int64Array
) -> list[dict[str, Array]]:
    """Return the elements at cells `lo` to `hi - 1` of a whole mesh, for each boundary group.

    Their points are numbered by their place in `point_gid`, the points of these cells.
    """
    held = []
    for group, cells in zip(mesh.boundary, cells_of_elements(mesh), strict=True):
        mine = np.flatnonzero(((cells >= lo) & (cells < hi)).any(axis=1))
        size = np.diff(group.indptr)[mine]
        indptr = np.concatenate(([0], np.cumsum(size))).astype(OFFSET)
        within = np.arange(indptr[-1]) - np.repeat(indptr[:-1], size)
        points = group.indices[np.repeat(group.indptr[mine], size) + within]
        held.append(
            {
                "kind": group.kind[mine],
                "indptr": indptr,
                "indices": np.searchsorted(point_gid, points).astype(np.int32),
                "element_gid": mine.astype(np.int64),
                "cell_gid": cells[mine],
            }
        )
    return held
