"""One view as an image: every face that can be seen, parts in their colours, lines between them.

Edges of cells are drawn only where cells are large enough to tell apart; which triangle is seen at
a pixel is found in `sfcpart.report.raster`, so the size of the mesh does not matter.
"""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Array, BoolArray, FloatArray, Int32Array
from sfcpart.graph import CellGraph
from sfcpart.partition import Partition
from sfcpart.report.colours import part_colours
from sfcpart.report.contact import touching_parts
from sfcpart.report.raster import nearest_triangles
from sfcpart.report.surface import Triangles
from sfcpart.report.views import View, screen_axes

__all__ = ["Extent", "colours_of", "paint_view"]

FINE = 2  # image samples per pixel and axis
CELL_EDGE_FROM = 7.0  # pixels across a cell from which on its edges are drawn
LIGHT = np.array([0.35, -0.65, 0.9])

Extent = tuple[float, float, float, float]


def colours_of(partition: Partition, graph: CellGraph | None) -> FloatArray:
    """Give every part a colour that its neighbours do not have."""
    n_parts = partition.n_parts
    if graph is None or len(graph.indices) == 0:
        return part_colours([np.array([p - 1] if p else [], np.int64) for p in range(n_parts)])
    return part_colours(touching_parts(partition.cell_part, graph, n_parts=n_parts))


def paint_view(
    view: View, cell_part: Array, *, colours: FloatArray, width: int
) -> tuple[FloatArray, Extent]:
    """Draw one view; return the image and its extent in screen units (left, right, low, high)."""
    _, triangles, place = view
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
