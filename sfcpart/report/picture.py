"""A picture of a split as PNG: 2-D cells filled, 3-D as outer surface and pulled apart.

Every face that can be seen is drawn, whatever the size of the mesh. What is shown is chosen in
`sfcpart.report.views`, painted in `sfcpart.report.painting`, and put on paper in
`sfcpart.report.sheet`. Several splits of one mesh: `sfcpart.report.side_by_side`.
"""

from __future__ import annotations

from collections.abc import Mapping
from os import PathLike
from typing import Any

import numpy as np

from sfcpart.dtypes import FloatArray
from sfcpart.errors import InputError
from sfcpart.graph import CellGraph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.report.painting import colours_of, paint_view
from sfcpart.report.sheet import Panel, write_sheet
from sfcpart.report.views import split_views

__all__ = ["check_drawable", "draw_split", "figure_words", "part_labels"]

MOST_LABELS = 40
LEAST_WIDTH = 300


def draw_split(
    path: str | PathLike[str],
    mesh: Mesh,
    *,
    partition: Partition,
    graph: CellGraph | None = None,
    title: str = "",
    figures: Mapping[str, Any] | None = None,
    width: int = 1400,
) -> None:
    """Draw a split and write it as PNG.

    Parameters
    ----------
    path : path
        The file, replaced if it exists.
    mesh : Mesh
    partition : Partition
    graph : CellGraph, optional
        Of the mesh: which parts touch, and where parts of a 3-D mesh end. Without it (bare
        centres) colours may repeat among parts that touch.
    title : str
        First line, such as the name of the mesh; the number of parts by default.
    figures : mapping, optional
        `Assessment.total`: its imbalance, cut and halo are written below the picture.
    width : int
        Width of the picture in pixels, at least 300.

    Raises
    ------
    InputError
        If mesh and partition differ in their number of cells, or the width is too small.
    FileError
        If the file cannot be written.

    Notes
    -----
    O(n_cells) plus the pixels covered; a few seconds for 10^6 tets, of which drawing is one.
    """
    check_drawable(mesh, partition, width)
    colours = colours_of(partition, graph)
    views = [view for view in split_views(mesh, partition, graph) if len(view.triangles.cell)]
    labels = part_labels(mesh, partition)
    room = width // len(views)
    panels = [
        Panel(
            *paint_view(view, partition.cell_part, colours=colours, width=room),
            heading=view.name,
            labels=labels,
        )
        for view in views
    ]
    write_sheet(
        path,
        panels,
        columns=len(panels),
        title=title or f"{partition.n_parts:,} parts",
        caption=_caption(partition, figures),
        width=width,
    )


def check_drawable(mesh: Mesh, partition: Partition, width: int) -> None:
    """Refuse a partition of other cells, and sheets too narrow to show anything."""
    if partition.n_cells != mesh.n_cells:
        raise InputError(
            f"the partition has {partition.n_cells} cells, the mesh {mesh.n_cells}; wanted the same"
        )
    if width < LEAST_WIDTH:
        raise InputError(f"width is {width} pixels; wanted at least {LEAST_WIDTH}")


def part_labels(mesh: Mesh, partition: Partition) -> dict[int, FloatArray]:
    """Return where to write the numbers of few parts: at the cell nearest to a part's middle."""
    if mesh.space_dim != 2 or partition.n_parts > MOST_LABELS:
        return {}
    places = {}
    for part in range(partition.n_parts):
        center = mesh.centers[partition.cell_part == part]
        if len(center):
            apart = np.square(center - center.mean(axis=0)).sum(axis=1)
            places[part] = center[np.argmin(apart)]
    return places


def _caption(partition: Partition, figures: Mapping[str, Any] | None) -> str:
    """Put the figures into one line."""
    words = [f"{partition.n_cells:,} cells in {partition.n_parts:,} parts"]
    return " · ".join([*words, *figure_words(figures)])


def figure_words(figures: Mapping[str, Any] | None) -> list[str]:
    """Return those of imbalance, cut and halo that are known, in words."""
    words = []
    total = figures or {}
    if total.get("imbalance") is not None:
        words.append(f"imbalance {100 * total['imbalance']:.2g} %")
    if total.get("cut_faces") is not None:
        share = total.get("cut_share")
        words.append(
            f"{total['cut_faces']:,} faces cut" + (f" ({100 * share:.2g} %)" if share else "")
        )
    if total.get("halo_cells") is not None:
        words.append(f"{total['halo_cells']:,} halo cells")
    return words
