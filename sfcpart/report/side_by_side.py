"""Several splits of one mesh on one sheet: 2-D cells filled, 3-D parts pulled apart."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from os import PathLike
from typing import TYPE_CHECKING, Any, NamedTuple

from sfcpart.errors import InputError
from sfcpart.report.painting import colours_of, paint_view
from sfcpart.report.picture import check_drawable, figure_words, part_labels
from sfcpart.report.sheet import NOTE, Panel, write_sheet
from sfcpart.report.views import split_views

if TYPE_CHECKING:
    from sfcpart.graph import CellGraph
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = ["DrawnSplit", "draw_side_by_side"]

MOST_COLUMNS = 3
FLAT = 3.0  # meshes this much wider than high are drawn below each other


class DrawnSplit(NamedTuple):
    """A split to draw: its name, the parts, and `Assessment.total` (or some of it)."""

    name: str
    partition: Partition
    figures: Mapping[str, Any]


def draw_side_by_side(
    path: str | PathLike[str],
    mesh: Mesh,
    *,
    splits: Sequence[DrawnSplit],
    graph: CellGraph | None = None,
    title: str = "",
    notes: Sequence[str] = (),
    width: int = 1400,
) -> None:
    """Draw several splits of one mesh side by side and write them as one PNG.

    Parameters
    ----------
    path : path
        The file, replaced if it exists.
    mesh : Mesh
    splits : sequence of DrawnSplit
        At least one; a panel each, in this order.
    graph : CellGraph, optional
        As for `draw_split`.
    title : str
        First line; the number of splits by default.
    notes : sequence of str
        Small print below, such as which methods failed.
    width : int
        Width of the picture in pixels, at least 300.

    Raises
    ------
    InputError
        If there is no split, one has other cells than the mesh, or the width is too small.
    FileError
        If the file cannot be written.

    Notes
    -----
    As `draw_split` for each; colours follow the same rule in each panel, but a part's colour in one
    says nothing about that in another.
    """
    if not splits:
        raise InputError("there is no split to draw; wanted at least one")
    for split in splits:
        check_drawable(mesh, split.partition, width)
    columns = _columns(mesh, len(splits))
    panels = [_panel(mesh, split, graph, width // columns) for split in splits]
    n_parts = max(split.partition.n_parts for split in splits)
    write_sheet(
        path,
        panels,
        columns=columns,
        title=title or f"{len(splits)} splits",
        caption=f"{mesh.n_cells:,} cells in {n_parts:,} parts, split in {len(splits)} ways",
        width=width,
        notes=(NOTE, *notes),
    )


def _columns(mesh: Mesh, n_panels: int) -> int:
    """Return how many panels stand in a row: few for wide meshes, as square as may be."""
    if mesh.space_dim == 2:
        span = mesh.centers.max(axis=0) - mesh.centers.min(axis=0)
        if span[0] > FLAT * span[1]:
            return min(2, n_panels) if n_panels > MOST_COLUMNS else 1
    if n_panels == 4:
        return 2
    return min(MOST_COLUMNS, n_panels)


def _panel(mesh: Mesh, split: DrawnSplit, graph: CellGraph | None, width: int) -> Panel:
    """Paint the view that tells most of a split: of a solid mesh, its parts pulled apart."""
    views = [view for view in split_views(mesh, split.partition, graph) if len(view.triangles.cell)]
    colours = colours_of(split.partition, graph)
    image, extent = paint_view(views[-1], split.partition.cell_part, colours=colours, width=width)
    words = figure_words(split.figures)
    return Panel(
        image,
        extent,
        heading=split.name,
        lines=(" · ".join(words),) if words else (),
        labels=part_labels(mesh, split.partition),
    )
