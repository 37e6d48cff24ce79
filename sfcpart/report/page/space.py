"""The view of the parts in space, or in the plane."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.report.page.content import ViewPlot
from sfcpart.report.page.scene import MOST_TRIANGLES, Shape, pack_scene, thin_triangles
from sfcpart.report.page.still import still_picture
from sfcpart.report.painting import colours_of
from sfcpart.report.views import split_views

if TYPE_CHECKING:
    from sfcpart.graph import CellGraph
    from sfcpart.measure.assessment import Assessment
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = ["view_section"]

COLOURS_SAID = (
    "Touching parts differ in colour; the colours (Okabe and Ito, seven hues that colour-blind "
    "readers tell apart) repeat and carry no order."
)


def view_section(
    mesh: Mesh,
    partition: Partition,
    *,
    assessment: Assessment,
    graph: CellGraph | None,
    levels: Sequence[int] | None,
) -> ViewPlot:
    """Return the parts to draw, what to colour them by, and the picture for print."""
    triangles = split_views(mesh, partition, graph)[-1].triangles
    shape = thin_triangles(triangles, partition.cell_part, most=MOST_TRIANGLES)
    colours = colours_of(partition, graph)
    flat = mesh.space_dim == 2
    values = {"load": np.asarray(assessment.part["load"], np.float64)}
    halo, cells = assessment.part["halo_cells"], assessment.part["cells"]
    if halo is not None and cells is not None:
        values["halo share"] = np.where(cells > 0, halo / np.maximum(cells, 1), np.nan)
    what = "cells" if flat else "outer surface and pulled apart"
    return ViewPlot(
        "The parts in space" if not flat else "The parts",
        COLOURS_SAID,
        scene=pack_scene(shape, n_parts=partition.n_parts, dim=2 if flat else 3, colour=colours),
        values=values,
        levels=_levels(levels, partition.n_parts),
        picture=still_picture(shape, dim=2 if flat else 3, colours=colours),
        described=f"Picture of {partition.n_parts:,} parts in their colours: {what}.",
        note=_rule(shape, partition.n_parts),
    )


def _levels(levels: Sequence[int] | None, n_parts: int) -> dict[str, Array]:
    """Return the rank of each part on each level but the last, which is the part itself."""
    found: dict[str, Array] = {}
    below = n_parts
    for depth, size in enumerate(levels or ()):
        below //= size
        if below > 1:
            found[f"level {depth + 1} of {len(levels or ())}"] = np.arange(n_parts) // below
    return found


def _rule(shape: Shape, n_parts: int) -> str:
    """Say what is drawn, and by which rule it was thinned."""
    count = len(shape.part)
    if not shape.lattice:
        return f"All {count:,} triangles of what can be seen are drawn."
    gone = n_parts - len(np.unique(shape.part))
    small = f" {gone:,} parts are too small to be seen at that." if gone else ""
    return (
        f"Drawn are {count:,} of {shape.n_before:,} triangles: points were united on a lattice of "
        f"{shape.lattice:,} steps along the longest side, and triangles that collapsed or fell on "
        f"one another left out.{small} Figures are of the whole mesh."
    )
