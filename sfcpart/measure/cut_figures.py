"""Set the cut beside the least possible, where that is known.

The continuous bound needs a planar or solid mesh with points: faces alone do not show whether
some of them join opposite ends (periodic), where the bound would not hold. A bound above the cut
of the partition at hand would prove that the geometry is not what it seems (overlapping cells);
it is dropped. Cost: linear in parts, and one pass over the cells of a lattice.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from sfcpart.dtypes import Array, BoolArray
from sfcpart.measure.assessment import Number
from sfcpart.measure.bounds import least_cut_measure, least_lattice_cut
from sfcpart.measure.lattice import Lattice, find_lattice
from sfcpart.measure.shape import flat_axes, has_measures
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["cut_figures"]

_SLACK = 1e-9
"""Relative rounding allowed between a measured cut and a bound on it."""


def cut_figures(
    held: MeshSlice,
    graph: GraphSlice,
    *,
    part: Mapping[str, Array | None],
    total: Mapping[str, Number],
    n_faces: int,
) -> dict[str, Number]:
    """Return the totals that compare the cut with all faces and with the least (collective).

    Parameters
    ----------
    held, graph : MeshSlice, GraphSlice
    part : mapping of str to array
        Columns by part: "cells", "measure", "boundary_measure".
    total : mapping of str to number
        "cut_faces" and "cut_measure".
    n_faces : int
        Faces between two cells.
    """
    cut_faces, cut_measure = float(total["cut_faces"] or 0), float(total["cut_measure"] or 0)
    figures: dict[str, Number] = {
        "n_faces": n_faces,
        "cut_share": _ratio(cut_faces, n_faces),
    }
    axes = flat_axes(held)
    lattice = _lattice(held.mesh, graph, axes)
    if lattice is not None:
        least = _least_faces(lattice, part)
        figures |= {"least_cut_faces": least, "cut_faces_ratio": _ratio(cut_faces, least)}
    bound = max(
        0.0 if axes is None else _continuous_bound(held.mesh, part),
        0.0 if lattice is None else _least_faces(lattice, part) * lattice.face_measure,
    )
    if 0 < bound <= cut_measure * (1 + _SLACK):
        figures |= {"least_cut_measure": bound, "cut_measure_ratio": cut_measure / bound}
    return figures


def _lattice(mesh: Mesh, graph: GraphSlice, axes: BoolArray | None) -> Lattice | None:
    """Look for a lattice in a planar or solid mesh."""
    if axes is None or not has_measures(mesh):
        return None
    centers = mesh.centers if axes.all() else np.ascontiguousarray(mesh.centers[:, axes])
    return find_lattice(centers, mesh.measures, graph)


def _least_faces(lattice: Lattice, part: Mapping[str, Array | None]) -> int:
    """Return the bound on the cut faces of a lattice."""
    cells = part["cells"]
    assert cells is not None
    return least_lattice_cut(
        cells, dim=lattice.dim, boundary_faces=lattice.boundary_faces, sides=lattice.sides
    )


def _continuous_bound(mesh: Mesh, part: Mapping[str, Array | None]) -> float:
    """Return the isoperimetric bound on the cut measure of a flat mesh, 0 if there is none."""
    measure, boundary = part["measure"], part["boundary_measure"]
    if mesh.points is None or measure is None or boundary is None:
        return 0.0
    return least_cut_measure(measure, dim=mesh.dim, boundary_measure=float(boundary.sum()))


def _ratio(above: float, below: float) -> float | None:
    """Divide, None where there is nothing to divide by."""
    return above / below if below > 0 else None
