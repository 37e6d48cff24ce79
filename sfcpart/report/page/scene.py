"""The parts as few enough triangles for a page, packed into bytes.

Drawn is what `sfcpart.report.views` chooses: cells of a 2-D mesh, faces where parts of a 3-D mesh
end. Positions are counted in 2^16 steps along the longest side of the box. Where there are more
than `MOST_TRIANGLES`, points are first united in the cells of a coarser lattice (J. Rossignac and
P. Borrel, Multi-resolution 3D approximations for rendering complex scenes, 1993, from memory), each
group at the mean of its points, and triangles that collapse or fall on one another are dropped;
the lattice is made coarser until few enough are left. Both sides of an interface are thinned
alike, so that parts still meet.

Cost: a sort of the corners for each lattice tried (two or three).
"""

from __future__ import annotations

from base64 import b64encode
from dataclasses import dataclass
from typing import Any

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int64Array
from sfcpart.report.surface import Triangles

__all__ = ["MOST_TRIANGLES", "Shape", "pack_scene", "thin_triangles"]

MOST_TRIANGLES = 120_000
FINEST = 16  # bits of a coordinate
FIRST = 0.3  # steps of the first lattice tried, times the root of the triangles allowed
COARSEST = 2  # steps
_TABLE = 1 << 24  # cells of a lattice that are numbered by a table


@dataclass(frozen=True, eq=False)
class Shape:
    """Thinned triangles, sorted by part.

    Attributes
    ----------
    corners : (n, 3, 3) int64
        Positions in 2^16 steps; the third is 0 for plane meshes.
    part, face : (n,) int64
        Part of each triangle, and the face it belongs to.
    is_outer : (n,) bool
    n_before : int
        Triangles before thinning.
    lattice : int
        Steps of the lattice that points were united on, along the longest side; 0 if none were.
    low : (3,) float64
    step : float
        Position in space = low + step * corner.
    """

    corners: Int64Array
    part: Int64Array
    face: Int64Array
    is_outer: Array
    n_before: int
    lattice: int
    low: FloatArray
    step: float

    def to_space(self) -> FloatArray:
        """Return the corners in space, (n, 3, 3)."""
        return self.low + self.step * self.corners


def thin_triangles(triangles: Triangles, cell_part: Array, *, most: int = MOST_TRIANGLES) -> Shape:
    """Quantise triangles and thin them out until there are few enough."""
    place, low, step = _quantised(triangles.corners)
    part = cell_part[triangles.cell].astype(np.int64)
    lattice, corners, kept = 0, place, np.arange(len(part))
    if len(part) > most:
        lattice, corners, kept = _coarsened(place, part, most)
    order = kept[np.argsort(part[kept], kind="stable")]
    return Shape(
        corners=corners[order],
        part=part[order],
        face=triangles.face[order],
        is_outer=triangles.is_outer[order],
        n_before=len(part),
        lattice=lattice,
        low=low,
        step=step,
    )


def _quantised(corners: FloatArray) -> tuple[Int64Array, FloatArray, float]:
    """Return corners in 2^16 steps along the longest side of their box, (n, 3, 3)."""
    low, high = corners.min(axis=(0, 1)), corners.max(axis=(0, 1))
    span = float((high - low).max())
    step = (span if span > 0 else 1.0) / ((1 << FINEST) - 1)
    place = np.zeros((len(corners), 3, 3), np.int64)
    place[..., : corners.shape[2]] = np.rint((corners - low) / step)
    corner = np.zeros(3)
    corner[: len(low)] = low
    return place, corner, step


def _coarsened(
    place: Int64Array, part: Int64Array, most: int
) -> tuple[int, Int64Array, Int64Array]:
    """Try coarser lattices, each chosen by what the last one left, until few enough are left."""
    steps = round(FIRST * most**0.5)
    while True:
        group = _grouped(place, steps)
        kept = _different(group, part)
        if not len(kept):  # no lattice leaves few but some: every so many, as they are
            return steps, place, np.arange(0, len(place), -(-len(place) // most))
        if len(kept) <= most or steps <= COARSEST:
            return steps, _at_means(place, group), kept[:most]
        shrink = max(0.5, 0.85 * (most / len(kept)) ** 0.5)  # triangles grow as steps squared
        steps = max(COARSEST, int(shrink * steps))


def _grouped(place: Int64Array, steps: int) -> Int64Array:
    """Number the cells of a lattice that hold corners, (n, 3)."""
    cell = place * steps >> FINEST
    key = (cell[..., 0] * steps + cell[..., 1]) * steps + cell[..., 2]
    return _numbered(key.ravel(), steps).reshape(place.shape[:2])


def _at_means(place: Int64Array, group: Int64Array) -> Int64Array:
    """Move corners to the mean of their group."""
    flat = group.ravel()
    count = np.bincount(flat)
    mean = np.empty_like(place)
    for axis in range(3):  # sums of whole numbers below 2^53: exact in any order
        sums = np.bincount(flat, place[..., axis].ravel())
        mean[..., axis] = np.rint(sums / count)[group]
    return mean


def _numbered(key: Int64Array, steps: int) -> Int64Array:
    """Number the different cells of a lattice from 0, in order; by a table where that is small."""
    if steps**3 > _TABLE:
        return np.unique(key, return_inverse=True)[1].ravel().astype(np.int64)
    there = np.zeros(steps**3, bool)
    there[key] = True
    numbers: Int64Array = (np.cumsum(there, dtype=np.int64) - 1)[key]
    return numbers


def _different(group: Int64Array, part: Int64Array) -> Int64Array:
    """Return the triangles with three corners, one of those that coincide within a part."""
    a, b, c = np.sort(group, axis=1).T
    whole = np.flatnonzero((a != b) & (b != c))
    if not len(whole):
        return whole
    base = int(group.max()) + 1
    low = a[whole] * base + b[whole]  # below 2^62: there are less than 2^31 points
    high = c[whole] * (int(part.max()) + 1) + part[whole]
    order = np.lexsort((low, high))
    is_new = np.ones(len(order), bool)
    is_new[1:] = (np.diff(low[order]) != 0) | (np.diff(high[order]) != 0)
    return np.sort(whole[order[is_new]])


def pack_scene(shape: Shape, *, n_parts: int, dim: int, colour: Array) -> dict[str, Any]:
    """Return the scene ready for JSON: bytes in base64, little-endian.

    Parameters
    ----------
    shape : Shape
    n_parts : int
    dim : int
        2 for meshes in the plane.
    colour : (n_parts, 3) float64
        Colour of each part, 0 to 1.

    Returns
    -------
    dict
        `position` (n_points, 3) uint16, `index` (n, 3) uint16 or uint32 counted inside each part,
        `points` and `triangles` of each part, `colour` of each part as #rrggbb.
    """
    owner = np.repeat(shape.part, 3)
    at = shape.corners.reshape(-1, 3)
    key = at[:, 0] << 2 * FINEST | at[:, 1] << FINEST | at[:, 2]
    order = np.lexsort((key, owner))
    is_new = np.ones(len(order), bool)
    is_new[1:] = (owner[order][1:] != owner[order][:-1]) | (key[order][1:] != key[order][:-1])
    number = np.empty(len(order), np.int64)
    number[order] = np.cumsum(is_new) - 1
    first = order[is_new]
    points = np.bincount(owner[first], minlength=n_parts)
    start = np.cumsum(points) - points
    index = number - start[owner]
    wide = bool(len(index)) and int(index.max()) >= 1 << 16
    return {
        "dim": dim,
        "wide": wide,
        "position": _text(at[first].astype("<u2")),
        "index": _text(index.astype("<u4" if wide else "<u2")),
        "points": points.tolist(),
        "triangles": np.bincount(shape.part, minlength=n_parts).tolist(),
        "colour": [_hex(tone) for tone in colour],
    }


def _text(array: Array) -> str:
    """Write bytes as base64."""
    return b64encode(np.ascontiguousarray(array).tobytes()).decode("ascii")


def _hex(tone: FloatArray) -> str:
    """Write a colour as #rrggbb."""
    return "#" + "".join(f"{round(255 * float(value)):02x}" for value in tone)
