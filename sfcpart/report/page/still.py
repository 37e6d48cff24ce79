"""The picture that stands in a page where nothing can be drawn: a PNG as a data URL.

Painted from the thinned triangles, so that it costs little; colours are reduced to 128 for size.
"""

from __future__ import annotations

from base64 import b64encode
from io import BytesIO

import numpy as np

from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.report.page.scene import Shape
from sfcpart.report.painting import paint_view
from sfcpart.report.surface import Triangles
from sfcpart.report.views import PULL, View

__all__ = ["still_picture"]

WIDTH = 960  # pixels
COLOURS = 128


def still_picture(shape: Shape, *, dim: int, colours: FloatArray) -> str:
    """Draw the parts: in the plane, or as they lie in space and pulled apart."""
    corners = shape.to_space()[..., : max(dim, 2)]
    every, outer = np.arange(len(corners)), np.flatnonzero(shape.is_outer)
    if dim == 2 or not len(outer):
        return _data_url(_painted(shape, corners, every, colours, WIDTH))
    moved = corners + _moves(shape, corners, len(colours))[:, None]
    both = [
        _painted(shape, corners, outer, colours, WIDTH // 2),
        _painted(shape, moved, every, colours, WIDTH // 2),
    ]
    tall = max(image.shape[0] for image in both)
    return _data_url(np.concatenate([_on_white(image, tall) for image in both], axis=1))


def _painted(
    shape: Shape, place: FloatArray, drawn: Int64Array, colours: FloatArray, width: int
) -> FloatArray:
    """Paint one view of the triangles drawn."""
    corners = place[drawn]
    triangles = Triangles(corners, drawn, shape.face[drawn], shape.is_outer[drawn])
    view = View("", triangles, corners)
    image, _ = paint_view(view, shape.part, colours=colours, width=width)
    return image


def _moves(shape: Shape, corners: FloatArray, n_parts: int) -> FloatArray:
    """Return how far the part of each triangle moves away from the middle."""
    middle = corners.mean(axis=1)
    count = np.maximum(np.bincount(shape.part, minlength=n_parts), 1)[:, None]
    sums = np.stack([np.bincount(shape.part, axis, n_parts) for axis in middle.T], axis=1)
    center = (corners.min(axis=(0, 1)) + corners.max(axis=(0, 1))) / 2
    moves: FloatArray = (PULL * (sums / count - center))[shape.part]
    return moves


def _on_white(image: FloatArray, tall: int) -> FloatArray:
    """Center an image on white of a given height."""
    sheet = np.ones((tall, image.shape[1], 3), image.dtype)
    top = (tall - image.shape[0]) // 2
    sheet[top : top + image.shape[0]] = image
    return sheet


def _data_url(image: FloatArray) -> str:
    """Pack an image as PNG."""
    from PIL import Image

    pixels = np.clip(np.rint(image * 255), 0, 255).astype(np.uint8)
    packed = BytesIO()
    Image.fromarray(pixels).quantize(COLOURS).save(packed, format="PNG")
    return "data:image/png;base64," + b64encode(packed.getvalue()).decode("ascii")
