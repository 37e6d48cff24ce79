"""Panels in rows on one sheet with a title above and lines of text below, written as PNG."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from os import PathLike
from pathlib import Path
from typing import Any

from sfcpart.dtypes import FloatArray
from sfcpart.errors import FileError
from sfcpart.report.painting import Extent

__all__ = ["NOTE", "Panel", "write_sheet"]

NOTE = "Touching parts differ in colour; the colours (Okabe and Ito) repeat and carry no order."

DPI = 100
TITLE, HEADING, LINE = 40, 30, 20  # pixels
SMALLEST_LETTER = 6.0  # points


@dataclass(frozen=True, eq=False)
class Panel:
    """An image with a heading, lines below the heading, and numbers of parts written on it."""

    image: FloatArray
    extent: Extent
    heading: str = ""
    lines: tuple[str, ...] = ()
    labels: Mapping[int, FloatArray] = field(default_factory=dict)


def write_sheet(
    path: str | PathLike[str],
    panels: Sequence[Panel],
    *,
    columns: int,
    title: str,
    caption: str,
    width: int,
    notes: Sequence[str] = (NOTE,),
) -> None:
    """Arrange panels row by row and write the file.

    Parameters
    ----------
    path : path
        The file, replaced if it exists.
    panels : sequence of Panel
    columns : int
        Panels in a row.
    title, caption : str
        First line of the sheet; line below the panels.
    width : int
        Width of the sheet in pixels.
    notes : sequence of str
        Small print under the caption.

    Raises
    ------
    FileError
        If the file cannot be written.
    """
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    rows = [panels[k : k + columns] for k in range(0, len(panels), columns)]
    tall = [max(panel.image.shape[0] for panel in row) for row in rows]
    head = HEADING + LINE * max(len(panel.lines) for panel in panels)
    foot = 50 + LINE * len(notes) + 20
    height = TITLE + sum(tall) + head * len(rows) + foot
    figure = Figure(figsize=(width / DPI, height / DPI), dpi=DPI, facecolor="white")
    FigureCanvasAgg(figure)
    _write(figure, 0.02, 1 - 26 / height, title, size=14, fontweight="bold")
    _write(figure, 0.02, (foot - 48) / height, caption, size=12)
    for k, note in enumerate(notes):
        below = (foot - 72 - LINE * k) / height
        _write(figure, 0.02, below, note, size=9, color="0.35")
    top = height - TITLE
    for row, pixels in zip(rows, tall, strict=True):
        for k, panel in enumerate(row):
            _head(figure, panel, (k + 0.5) / columns, top, 1 / columns)
            low = (top - head - pixels) / height
            _image(figure, panel, (k / columns, low, 1 / columns, pixels / height))
        top -= head + pixels
    try:
        figure.savefig(path, format="png", dpi=DPI, metadata={"Software": "sfcpart"})
    except OSError as error:
        raise FileError(f"{Path(path)}: cannot be written: {error.strerror or error}") from error


def _head(figure: Any, panel: Panel, center: float, top: int, share: float) -> None:
    """Write the heading of a panel and the lines below it."""
    height = figure.get_figheight() * DPI
    bold = "bold" if panel.lines else "normal"
    place = 1 - (height - top + HEADING / 2) / height
    _write(figure, center, place, panel.heading, size=11, share=share, fontweight=bold, ha="center")
    for k, line in enumerate(panel.lines):
        place = 1 - (height - top + HEADING + LINE * (k + 0.3)) / height
        _write(figure, center, place, line, size=10, share=share, ha="center")


def _write(
    figure: Any, x: float, y: float, text: str, *, size: float, share: float = 0.98, **style: Any
) -> None:
    """Write a line; if wider than its share of the sheet, in smaller letters, then cut off."""
    text = text.encode("utf-8", "replace").decode()  # file names may be no UTF-8, or hold $
    line = figure.text(x, y, text, fontsize=size, va="center", parse_math=False, **style)
    room = 0.96 * share * figure.get_figwidth() * DPI
    wide = line.get_window_extent().width
    if wide <= room:
        return
    line.set_fontsize(max(SMALLEST_LETTER, size * room / wide))
    wide = line.get_window_extent().width
    if wide > room:
        line.set_text(f"{text[: max(1, int(len(text) * room / wide) - 2)]}\u2026")


def _image(figure: Any, panel: Panel, room: tuple[float, float, float, float]) -> None:
    """Show the image and the numbers of the parts."""
    axes = figure.add_axes(room)
    axes.imshow(panel.image, extent=panel.extent, interpolation="nearest", aspect="equal")
    axes.set_axis_off()
    for part, place in panel.labels.items():
        mark = axes.text(
            place[0], place[1], str(part), fontsize=10, ha="center", va="center", color="0.1"
        )
        mark.set_bbox({"facecolor": "white", "alpha": 0.75, "edgecolor": "none", "pad": 1.2})
