"""Shape of meshes and parts: is the mesh planar or solid, how stretched is a part.

Cost: linear in points (once), then in parts.
"""

from __future__ import annotations

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import BoolArray, FloatArray, Int64Array
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["extent_of", "flat_axes", "has_measures", "part_stretch"]

_FLAT = 1e-12
"""Extent over largest extent below which an axis counts as constant."""


def has_measures(mesh: Mesh) -> bool:
    """Tell whether the measures of the cells are known, not just taken as 1."""
    return mesh.points is not None or mesh.given_measure is not None


def flat_axes(held: MeshSlice) -> BoolArray | None:
    """Tell which axes a planar or solid mesh uses (collective).

    Returns
    -------
    (space_dim,) bool, or None
        As many axes as the mesh has dimensions; None for a curved or tilted surface, on which a
        part may have less surface than the disc of its measure.
    """
    mesh = held.mesh
    if mesh.dim == mesh.space_dim:
        return np.ones(mesh.dim, np.bool_)
    low, high = extent_of(mesh.centers if mesh.points is None else mesh.points, held.comm)
    is_used: BoolArray = high - low > _FLAT * (high - low).max()
    return is_used if int(is_used.sum()) == mesh.dim else None


def extent_of(places: FloatArray, comm: Comm) -> tuple[FloatArray, FloatArray]:
    """Return the corners of the box around places of all ranks (collective)."""
    low = comm.allreduce(places.min(axis=0, initial=np.inf), "min")
    return low, comm.allreduce(places.max(axis=0, initial=-np.inf), "max")


def part_stretch(
    low: FloatArray, high: FloatArray, *, n_cells: Int64Array, measure: FloatArray, dim: int
) -> FloatArray:
    """Return longest over shortest side of the box of cell centres of each part.

    Every side is lengthened by one mean cell size, (measure / cells)^(1/dim): the box of a block
    of cubes is then the block itself, and one layer of them stays finite. On a surface in 3-D the
    second longest side takes the place of the shortest. NaN for parts without cells, and where a
    side is still 0 (no measures known).

    Examples
    --------
    Three unit squares in a row.

    >>> part_stretch(np.array([[0.5, 0.5]]), np.array([[2.5, 0.5]]), n_cells=np.array([3]),
    ...              measure=np.array([3.0]), dim=2).tolist()
    [3.0]
    """
    with np.errstate(invalid="ignore", divide="ignore"):
        cell_size = (measure / n_cells) ** (1 / dim)
        sides = np.sort(high - low + cell_size[:, None], axis=1)[:, ::-1]
        stretch: FloatArray = sides[:, 0] / sides[:, dim - 1]
    return np.where(np.isfinite(stretch), stretch, np.nan)
