"""What a picture of a split shows: which triangles, and from where they are looked at.

2-D cells and surfaces are one view; 3-D meshes two: the outer surface, and every part moved away
from the middle. Meshes without points are drawn by their centres, as cubes of the cells' measure:
those of outer cells and of cells at the rim of a part where these are known; of more than
`MOST_MARKS`, evenly picked ones.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from sfcpart.dtypes import Array, FloatArray
from sfcpart.graph import CellGraph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.report.contact import rim_cells
from sfcpart.report.surface import Triangles, cell_triangles, part_surface

__all__ = ["View", "screen_axes", "split_views"]

MOST_MARKS = 150_000
PULL = 0.45  # how far parts move away from the middle, in distances from it
AZIMUTH, ELEVATION = -62.0, 24.0


class View(NamedTuple):
    """A view: its name, triangles, and where their corners are drawn, (n, 3, dim)."""

    name: str
    triangles: Triangles
    place: FloatArray


def split_views(mesh: Mesh, partition: Partition, graph: CellGraph | None) -> list[View]:
    """Choose what is shown: names, triangles, and their corners in space (n, 3, dim)."""
    if mesh.points is None or (mesh.dim == 3 and graph is None):
        return _centre_views(mesh, partition, graph)
    if mesh.dim < 3:
        cells = cell_triangles(mesh)
        return [View("" if mesh.space_dim == 2 else "surface", cells, cells.corners)]
    assert graph is not None
    rim = part_surface(mesh, partition.cell_part, graph=graph)
    outer = Triangles(
        rim.corners[rim.is_outer],
        rim.cell[rim.is_outer],
        rim.face[rim.is_outer],
        rim.is_outer[rim.is_outer],
    )
    return [
        View("outer surface", outer, outer.corners),
        View("pulled apart", rim, _apart(mesh, partition, rim)),
    ]


def _centre_views(mesh: Mesh, partition: Partition, graph: CellGraph | None) -> list[View]:
    """Show cells as marks at their centres: those outside, and apart those at rims of parts."""
    if graph is None or mesh.space_dim == 2:
        marks = _marks(mesh, np.arange(mesh.n_cells))
        return [View("cells by their centres", marks, marks.corners)]
    is_outer = graph.boundary_count > 0
    outer = _marks(mesh, np.flatnonzero(is_outer if is_outer.any() else ~is_outer))
    rim = _marks(mesh, np.flatnonzero(rim_cells(partition.cell_part, graph)))
    return [
        View("cells by their centres", outer, outer.corners),
        View("pulled apart", rim, _apart(mesh, partition, rim)),
    ]


def _apart(mesh: Mesh, partition: Partition, rim: Triangles) -> FloatArray:
    """Move every part away from the middle of the mesh."""
    part = partition.cell_part
    size = np.maximum(partition.part_size(), 1)[:, None]
    sums = [np.bincount(part, axis, partition.n_parts) for axis in mesh.centers.T]
    middle = np.stack(sums, axis=1) / size
    move = PULL * (middle - (mesh.centers.min(axis=0) + mesh.centers.max(axis=0)) / 2)
    moved: FloatArray = rim.corners + move[part[rim.cell]][:, None, :]
    return moved


def _marks(mesh: Mesh, cells: Array) -> Triangles:
    """Put a cube (a square in 2-D) of the cell's measure at the centre of each cell drawn."""
    cells = cells[:: max(1, -(-len(cells) // MOST_MARKS))]
    squares = _visible_squares(mesh.space_dim)
    corner = mesh.centers[cells][:, None, None, :] + _mark_radius(mesh, cells) * squares
    corner = corner.reshape(-1, 4, mesh.space_dim)
    both = np.concatenate([corner[:, [0, 1, 2]], corner[:, [0, 2, 3]]])
    face = np.tile(np.arange(len(corner)), 2)
    cell = cells[face // len(squares)].astype(np.int64)
    return Triangles(both, cell, face, np.ones(len(cell), bool))


def _mark_radius(mesh: Mesh, cells: Array) -> FloatArray:
    """Return half the edge of a cube of each cell's measure; of equal shares if all are 0."""
    span = np.ptp(mesh.centers, axis=0)
    dim = max(1, int((span > 0).sum()))
    size = mesh.measures[cells]
    if not size.any():
        size = np.full(len(cells), float(np.prod(span[span > 0])) / mesh.n_cells)
    radius: FloatArray = 0.5 * size ** (1.0 / dim)
    return radius[:, None, None, None]


def _visible_squares(dim: int) -> FloatArray:
    """Return the sides of the cube of edge 2 that the viewer sees, (1 or 3, 4, dim)."""
    ring = np.array([[-1.0, -1.0], [1.0, -1.0], [1.0, 1.0], [-1.0, 1.0]])
    if dim == 2:
        return ring[None]
    toward = -np.sign(screen_axes(3)[2])
    return np.stack([np.insert(ring, axis, toward[axis], axis=1) for axis in range(3)])


def screen_axes(dim: int) -> FloatArray:
    """Return the axes of the screen: to the right, up, and away from the viewer."""
    if dim == 2:
        return np.array([[1.0, 0.0], [0.0, 1.0], [0.0, 0.0]])
    a, e = np.radians(AZIMUTH), np.radians(ELEVATION)
    away = -np.array([np.cos(e) * np.cos(a), np.cos(e) * np.sin(a), np.sin(e)])
    right = np.array([-np.sin(a), np.cos(a), 0.0])
    return np.stack([right, np.cross(right, away), away])
