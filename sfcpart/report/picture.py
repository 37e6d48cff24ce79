"""A picture of a split as PNG: 2-D cells filled, 3-D as outer surface and pulled apart.

Every face that can be seen is drawn, whatever the size of the mesh (`sfcpart.report.raster`);
edges of cells are drawn only where cells are large enough to tell apart. What is shown is chosen
in `sfcpart.report.views`, colours in `sfcpart.report.colours`.
"""

from __future__ import annotations

from collections.abc import Mapping
from os import PathLike
from pathlib import Path
from typing import Any

import numpy as np

from sfcpart.dtypes import Array, BoolArray, FloatArray, Int32Array
from sfcpart.errors import FileError, InputError
from sfcpart.graph import CellGraph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.report.colours import part_colours
from sfcpart.report.contact import touching_parts
from sfcpart.report.raster import nearest_triangles
from sfcpart.report.surface import Triangles
from sfcpart.report.views import screen_axes, split_views

__all__ = ["draw_split"]

FINE = 2  # image samples per pixel and axis
CELL_EDGE_FROM = 7.0  # pixels across a cell from which on its edges are drawn
LIGHT = np.array([0.35, -0.65, 0.9])


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
    if partition.n_cells != mesh.n_cells:
        raise InputError(
            f"the partition has {partition.n_cells} cells, the mesh {mesh.n_cells}; wanted the same"
        )
    if width < 300:
        raise InputError(f"width is {width} pixels; wanted at least 300")
    colours = _colours(partition, graph)
    views = [view for view in split_views(mesh, partition, graph) if len(view.triangles.cell)]
    panels = [
        (name, *_render(triangles, place, width // len(views), partition.cell_part, colours))
        for name, triangles, place in views
    ]
    labels = _labels(mesh, partition) if mesh.space_dim == 2 else {}
    caption = _caption(partition, figures)
    title = title or f"{partition.n_parts:,} parts"
    _write(Path(path), panels, labels=labels, title=title, caption=caption, width=width)


def _colours(partition: Partition, graph: CellGraph | None) -> FloatArray:
    """Give every part a colour that its neighbours do not have."""
    n_parts = partition.n_parts
    if graph is None or len(graph.indices) == 0:
        return part_colours([np.array([p - 1] if p else [], np.int64) for p in range(n_parts)])
    return part_colours(touching_parts(partition.cell_part, graph, n_parts=n_parts))


def _render(
    triangles: Triangles, place: FloatArray, width: int, cell_part: Array, colours: FloatArray
) -> tuple[FloatArray, tuple[float, float, float, float]]:
    """Draw one view; returns the image and its extent in screen units (left, right, low, high)."""
    axes = screen_axes(place.shape[2])
    flat = place @ axes.T
    low, high = flat.min(axis=(0, 1)), flat.max(axis=(0, 1))
    span = np.maximum(high - low, 1e-12 * max(1.0, float(np.abs(high).max())))
    scale = min(width * FINE / span[0], 0.75 * width * FINE / span[1]) * 0.97
    margin = 0.015 * width * FINE
    rows, columns = (int(np.ceil(span[k] * scale + 2 * margin)) for k in (1, 0))
    flat[..., 0] = (flat[..., 0] - low[0]) * scale + margin
    flat[..., 1] = (high[1] - flat[..., 1]) * scale + margin
    seen = nearest_triangles(flat, (rows, columns))
    image = _painted(seen, triangles, place, cell_part, colours)
    extent = (
        low[0] - margin / scale,
        low[0] + (columns - margin) / scale,
        high[1] - (rows - margin) / scale,
        high[1] + margin / scale,
    )
    return _smoothed(image), extent


def _painted(
    seen: Int32Array, triangles: Triangles, place: FloatArray, cell_part: Array, colours: FloatArray
) -> FloatArray:
    """Colour the pixels: part, shade of the face, lines between cells and between parts."""
    hit = seen >= 0
    safe = np.where(hit, seen, 0)
    part = np.where(hit, cell_part[triangles.cell[safe]], -1)
    face = np.where(hit, triangles.face[safe], -1)
    image = np.ones((*seen.shape, 3), np.float32)
    image[hit] = colours[part[hit]] * _shade(place)[seen[hit], None]
    n_faces = max(1, int(np.count_nonzero(np.bincount(face[hit]))))
    if (hit.sum() / n_faces) ** 0.5 / FINE > CELL_EDGE_FROM:
        image[_borders(face, 1)] *= 0.78
    image[_borders(part, FINE)] = 0.13
    return image


def _shade(place: FloatArray) -> FloatArray:
    """Return the brightness of each triangle under a fixed light, both sides alike."""
    if place.shape[2] == 2:
        return np.ones(len(place))
    normal = np.cross(place[:, 1] - place[:, 0], place[:, 2] - place[:, 0])
    length = np.linalg.norm(normal, axis=1)
    toward = normal @ screen_axes(3)[2]
    normal[toward > 0] *= -1.0
    light = normal @ (LIGHT / np.linalg.norm(LIGHT))
    cosine = np.divide(light, length, out=np.ones(len(place)), where=length > 0)
    shade: FloatArray = 0.62 + 0.38 * np.clip(cosine, 0.0, 1.0)
    return shade


def _borders(label: Array, thickness: int) -> BoolArray:
    """Mark pixels whose right or lower neighbours, up to a distance, carry another label."""
    marked = np.zeros(label.shape, bool)
    for axis in (0, 1):
        for step in range(1, thickness + 1):
            here = np.moveaxis(label, axis, 0)[:-step]
            there = np.moveaxis(label, axis, 0)[step:]
            np.moveaxis(marked, axis, 0)[:-step] |= here != there
    return marked


def _smoothed(image: FloatArray) -> FloatArray:
    """Average blocks of FINE x FINE samples."""
    rows, columns = (n // FINE * FINE for n in image.shape[:2])
    block = image[:rows, :columns].reshape(rows // FINE, FINE, columns // FINE, FINE, 3)
    return np.asarray(block.mean(axis=(1, 3)))


def _labels(mesh: Mesh, partition: Partition) -> dict[int, FloatArray]:
    """Return where to write the numbers of the parts: at the cell nearest to a part's middle."""
    if partition.n_parts > 40:
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
    return " · ".join(words)


def _write(
    path: Path,
    panels: list[tuple[str, FloatArray, tuple[float, float, float, float]]],
    *,
    labels: Mapping[int, FloatArray],
    title: str,
    caption: str,
    width: int,
) -> None:
    """Arrange the panels side by side and write the file."""
    from matplotlib.backends.backend_agg import FigureCanvasAgg
    from matplotlib.figure import Figure

    tallest = max(image.shape[0] for _, image, _ in panels)
    dpi, head, foot = 100, 70, 90
    height = tallest + head + foot
    figure = Figure(figsize=(width / dpi, height / dpi), dpi=dpi, facecolor="white")
    FigureCanvasAgg(figure)
    figure.text(0.02, 1 - 26 / height, title, fontsize=14, fontweight="bold", va="center")
    figure.text(0.02, 42 / height, caption, fontsize=12, va="center")
    note = "Touching parts differ in colour; the colours (Okabe and Ito) repeat and carry no order."
    figure.text(0.02, 18 / height, note, fontsize=9, color="0.35", va="center")
    for k, (name, image, extent) in enumerate(panels):
        room = (k / len(panels), foot / height, 1 / len(panels), tallest / height)
        axes = figure.add_axes(room)
        axes.imshow(image, extent=extent, interpolation="nearest", aspect="equal")
        axes.set_axis_off()
        center = (k + 0.5) / len(panels)
        figure.text(center, 1 - 54 / height, name, fontsize=11, ha="center", va="center")
        for part, place in labels.items():
            mark = axes.text(
                place[0], place[1], str(part), fontsize=10, ha="center", va="center", color="0.1"
            )
            mark.set_bbox({"facecolor": "white", "alpha": 0.75, "edgecolor": "none", "pad": 1.2})
    try:
        figure.savefig(path, format="png", dpi=dpi, metadata={"Software": "sfcpart"})
    except OSError as error:
        raise FileError(f"{path}: cannot be written: {error.strerror or error}") from error
