"""The Skerry Channel, the invented scenario of all examples, as meshes of every sort.

A tidal channel runs along x over a rock bed with a rise in the middle (the skerry); on the rise
stands a submerged pier, and downstream of it turns a turbine. Lengths are in metres. Heights
depend on x alone and straight lines join the columns, so that all faces are planar and every
area and volume follows from the heights at the columns (`section_area`). What stands in the water
is in `sfcpart.mesh.structures`.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from sfcpart.dtypes import Array, BoolArray, FloatArray, IntArray
from sfcpart.errors import InputError
from sfcpart.mesh.shape import Shape, extrude, with_used_points
from sfcpart.mesh.shapes import box_corners, grid_points, kuhn_tets

__all__ = [
    "channel_mixed",
    "channel_section",
    "channel_water",
    "section_area",
]

LENGTH, DEPTH, RISE = 40.0, 10.0, 3.0
LAYER_HEIGHT = 0.8
PIER_COLUMNS = (0.45, 0.55)
PIER_TOP = 0.5


def bed_height(x: FloatArray) -> FloatArray:
    """Return the height of the rock bed below the surface (which is at 0), in metres."""
    rise = RISE * np.sin(np.pi * np.clip(x / LENGTH, 0.0, 1.0)) ** 2
    return np.asarray(rise - DEPTH)


def channel_section(
    n_along: int, n_up: int, *, n_layers: int = 6, growth: float = 1.4, pier: bool = True
) -> Shape:
    """Return the channel seen from the side: stretched quads at the bed, triangles above.

    Parameters
    ----------
    n_along, n_up : int
        Columns along the channel (>= 10 with a pier) and rows of triangles above the layers.
    n_layers : int
        Wall layers at the bed, 0.8 m together.
    growth : float
        Height of a layer over that of the one below, >= 1.
    pier : bool
        Whether the pier's place (a tenth of the columns, half the rows) is left out.

    Returns
    -------
    Shape
        Blocks "quad" and "triangle"; fields "work" (float64, dearer in the layers) and "region"
        (int32: 0 water, 1 wall layer, 2 wake of the turbine); boundary groups "bed", "surface",
        "inflow", "outflow".

    Raises
    ------
    InputError
        If a count is too small or the growth is below 1.
    """
    if n_along < (10 if pier else 1) or n_up < 2 or n_layers < 1 or growth < 1.0:
        raise InputError(
            f"channel of {n_along} columns, {n_up} rows, {n_layers} layers, growth {growth}; "
            "wanted at least 10, 2, 1 and 1.0"
        )
    n_rows = n_layers + n_up
    corners = box_corners((n_along, n_rows)).reshape(n_rows, n_along, 4)
    kept = np.ones((n_rows, n_along), bool)
    if pier:
        kept[: n_layers + round(PIER_TOP * n_up), slice(*_pier_columns(n_along))] = False
    quads = corners[:n_layers][kept[:n_layers]]
    squares = corners[n_layers:][kept[n_layers:]]
    shape = Shape(
        points=_section_points(n_along, n_up, n_layers, growth),
        cells={"quad": quads, "triangle": _halved(squares)},
        boundary=_section_boundary(corners, kept),
    )
    shape = with_used_points(shape)
    return replace(shape, cell_fields=_section_fields(shape))


def section_area(n_along: int, *, n_layers: int = 6, n_up: int = 0, pier: bool = True) -> float:
    """Return the area of `channel_section`, from the heights at its columns alone, in m^2."""
    x = np.linspace(0.0, LENGTH, n_along + 1)
    depth = -bed_height(x)
    column = (depth[1:] + depth[:-1]) / 2 * np.diff(x)
    if not pier:
        return float(column.sum())
    first, last = _pier_columns(n_along)
    layer = LAYER_HEIGHT * np.diff(x)
    share = round(PIER_TOP * n_up) / n_up
    filled = layer + (column - layer) * share
    return float(column.sum() - filled[first:last].sum())


def channel_water(n_along: int, n_up: int, *, n_across: int, width: float = 12.0) -> Shape:
    """Return the section swept across the channel (z is up): hexahedra at the bed, wedges above.

    Fields and boundary groups are those of `channel_section`.
    """
    flat = channel_section(n_along, n_up)
    swept = extrude(flat, np.linspace(0.0, width, n_across + 1))
    along, up, across = swept.points.T
    return replace(swept, points=np.stack([along, width - across, up], axis=1))


def channel_mixed(counts: tuple[int, int], *, rows: tuple[int, int, int] = (1, 2, 2)) -> Shape:
    """Return a conforming 3-D mesh of wedges, hexahedra, pyramids and tets, bed to surface.

    Parameters
    ----------
    counts : 2 int
        Columns along and across the channel.
    rows : 3 int
        Rows of wedges, of hexahedra, and of cubes split into tets; one row of pyramids and tets
        joins the last two.

    Returns
    -------
    Shape
        Blocks "wedge", "hexahedron", "pyramid", "tetra"; fields "row" (int32), "work" and
        "memory" (float64: cost of a cell, kilobytes it takes); boundary group "bed" (quads).
    """
    n_wedge, n_hex, n_tet = rows
    n_rows = n_wedge + n_hex + 1 + n_tet
    corners = box_corners((*counts, n_rows)).reshape(n_rows, -1, 8)
    points = grid_points(
        [
            np.linspace(0.0, LENGTH, counts[0] + 1),
            np.linspace(0.0, 12.0, counts[1] + 1),
            np.linspace(1.0, 0.0, n_rows + 1),
        ]
    )
    points[:, 2] *= bed_height(points[:, 0])
    low, middle, joint, high = np.split(corners, np.cumsum([n_wedge, n_hex, 1]))
    middles = points[joint[0]].mean(axis=1)
    apex = (len(points) + np.arange(len(middles), dtype=corners.dtype))[:, None]
    pyramids, joint_tets = _joint_cells(joint[0], apex)
    tets = np.concatenate([joint_tets, high.reshape(-1, 8)[:, kuhn_tets()].reshape(-1, 4)])
    cells = {
        "wedge": low.reshape(-1, 8)[:, [[1, 2, 6, 0, 3, 7], [1, 6, 5, 0, 7, 4]]].reshape(-1, 6),
        "hexahedron": middle.reshape(-1, 8),
        "pyramid": pyramids,
        "tetra": tets,
    }
    sizes = [len(block) for block in cells.values()]
    fields = {
        "row": _rows(counts, rows),
        "work": np.repeat([1.5, 1.25, 1.0, 0.75], sizes),
        "memory": np.repeat([1.0, 1.2, 0.9, 0.7], sizes),
    }
    return Shape(
        points=np.concatenate([points, middles]),
        cells=cells,
        cell_fields=fields,
        boundary={"bed": corners[0][:, [0, 3, 2, 1]]},
    )


def _pier_columns(n_along: int) -> tuple[int, int]:
    """Return the first column of the pier and the one behind its last."""
    first, last = (round(share * n_along) for share in PIER_COLUMNS)
    return first, max(last, first + 1)


def _section_points(n_along: int, n_up: int, n_layers: int, growth: float) -> FloatArray:
    """Place columns evenly, layers in geometric steps, rows evenly above them."""
    x = np.linspace(0.0, LENGTH, n_along + 1)
    bed = bed_height(x)
    steps = growth ** np.arange(n_layers)
    layers = np.concatenate([[0.0], np.cumsum(steps) / steps.sum()]) * LAYER_HEIGHT
    free = np.linspace(0.0, 1.0, n_up + 1)[1:, None]
    above = (bed + LAYER_HEIGHT) * (1.0 - free)
    y = np.concatenate([bed + layers[:, None], above])
    return np.stack([np.broadcast_to(x, y.shape), y], axis=-1).reshape(-1, 2)


def _halved(squares: IntArray) -> IntArray:
    """Split squares into two triangles, the diagonal turning from square to square."""
    turned = (np.arange(len(squares)) % 2).astype(bool)
    rising = squares[:, [[0, 1, 2], [0, 2, 3]]]
    falling = squares[:, [[0, 1, 3], [1, 2, 3]]]
    return np.where(turned[:, None, None], falling, rising).reshape(-1, 3)


def _section_boundary(corners: IntArray, kept: BoolArray) -> dict[str, IntArray]:
    """Collect the outer edges of the kept squares; what is no end and no surface is bed."""
    framed = np.pad(kept, 1)
    sides = {
        "bed": ((0, 1), (0, 1)),
        "right": ((1, 2), (1, 2)),
        "top": ((2, 1), (2, 3)),
        "left": ((1, 0), (3, 0)),
    }
    edges: dict[str, IntArray] = {}
    for name, ((down, left), pair) in sides.items():
        n_rows, n_columns = kept.shape
        beside = framed[down : down + n_rows, left : left + n_columns]
        edges[name] = np.where((kept & ~beside)[..., None], corners[..., list(pair)], -1)
    surface, outflow, inflow = edges["top"][-1], edges["right"][:, -1], edges["left"][:, 0]
    pier = [edges["top"][:-1], edges["right"][:, :-1], edges["left"][:, 1:]]
    bed = np.concatenate([edges["bed"].reshape(-1, 2), *(edge.reshape(-1, 2) for edge in pier)])
    groups = {"bed": bed, "surface": surface, "inflow": inflow, "outflow": outflow}
    return {name: group[group[:, 0] >= 0] for name, group in groups.items()}


def _section_fields(shape: Shape) -> dict[str, Array]:
    """Price the cells (wall layers cost half as much again) and name their regions."""
    blocks = [shape.points[block].mean(axis=1) for block in shape.cells.values()]
    center = np.concatenate(blocks)
    layer = np.arange(shape.n_cells) < len(blocks[0])
    wake = ~layer & (np.abs(center[:, 1] + 4.0) < 1.5) & (center[:, 0] > 0.6 * LENGTH)
    work = np.where(layer, 1.5, np.where(wake, 1.25, 1.0))
    return {"work": work, "region": (layer + 2 * wake).astype(np.int32)}


def _joint_cells(cubes: IntArray, apex: IntArray) -> tuple[IntArray, IntArray]:
    """Split cubes about their middles: pyramids on five faces, two tets on the top face."""
    bases = [[0, 1, 2, 3], [0, 4, 5, 1], [1, 5, 6, 2], [2, 6, 7, 3], [3, 7, 4, 0]]
    pyramids = [np.concatenate([cubes[:, base], apex], axis=1) for base in bases]
    tets = [np.concatenate([cubes[:, base], apex], axis=1) for base in ([4, 6, 5], [4, 7, 6])]
    return np.concatenate(pyramids), np.concatenate(tets)


def _rows(counts: tuple[int, int], rows: tuple[int, int, int]) -> Array:
    """Return the row of every cell of the mixed mesh, in block order."""
    n_wedge, n_hex, n_tet = rows
    n = counts[0] * counts[1]
    joint = n_wedge + n_hex
    numbers = [*range(n_wedge), *range(n_wedge, joint), joint, joint]
    repeats = [2 * n] * n_wedge + [n] * n_hex + [5 * n, 2 * n]
    numbers += range(joint + 1, joint + 1 + n_tet)
    return np.repeat(numbers, repeats + [6 * n] * n_tet).astype(np.int32)
