"""What stands in the Skerry Channel: the pier's shell, and the turbine's rotor in its water.

Lengths are in metres, as in `sfcpart.mesh.channel`.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from sfcpart.dtypes import IntArray
from sfcpart.errors import InputError
from sfcpart.mesh.shape import Shape, extrude, with_used_points
from sfcpart.mesh.shapes import lattice

__all__ = ["channel_with_rotor", "pier_shell"]


def pier_shell(n_around: int, n_up: int, *, fin: int = 0) -> Shape:
    """Return the pier's shell, a surface in 3-D: quads round it, a cap of triangles, no bottom.

    Parameters
    ----------
    n_around, n_up : int
        Quads round the pier (radius 2 m) and up its side (height 5 m).
    fin : int
        Columns of quads (0.5 m each) of a fin that is joined to the side along one upright line:
        there, three faces meet at an edge (a non-manifold surface). 0 leaves it out.

    Returns
    -------
    Shape
        Blocks "quad" and "triangle"; field "sheet" (int32: 0 side, 1 cap, 2 fin).
    """
    angle = 2 * np.pi * np.arange(n_around) / n_around
    height = np.linspace(-8.0, -3.0, n_up + 1)
    ring = np.stack([20.0 + 2.0 * np.cos(angle), 6.0 + 2.0 * np.sin(angle)], axis=1)
    side = np.concatenate([np.tile(ring, (n_up + 1, 1)), np.repeat(height, n_around)[:, None]], 1)
    top = np.array([[20.0, 6.0, height[-1]]])
    away = 22.0 + 0.5 * np.tile(np.arange(1, fin + 1), n_up + 1)
    fins = np.stack([away, np.full_like(away, 6.0), np.repeat(height, fin)], axis=1)
    fin_ids = np.arange(len(fins)).reshape(n_up + 1, fin) + len(side) + 1
    sheet = np.concatenate([(np.arange(n_up + 1) * n_around)[:, None], fin_ids], axis=1)
    quads = np.concatenate([_wrapped(n_around, n_up), _grid_quads(sheet)]).astype(np.int32)
    cap = _fan(n_up * n_around, n_around, len(side))
    n_side = n_around * n_up
    kinds = np.repeat([0, 2, 1], [n_side, fin * n_up, n_around]).astype(np.int32)
    return Shape(
        points=np.concatenate([side, top, fins]),
        cells={"quad": quads, "triangle": cap},
        cell_fields={"sheet": kinds},
    )


def channel_with_rotor(n: int, *, n_blades: int = 12) -> Shape:
    """Return two bodies that touch nowhere: water of cubes with a hollow, the rotor inside it.

    Parameters
    ----------
    n : int
        Cubes across the 8 m wide box of water, a multiple of 4; the middle quarter of the length,
        half the width and half the height is hollow.
    n_blades : int
        Sectors of the rotor, a disc of radius 1.6 m and thickness 0.8 m along x.

    Returns
    -------
    Shape
        Blocks "hexahedron" (water, then the rotor's rim) and "wedge" (its hub); field "body"
        (int32: 0 water, 1 rotor).

    Raises
    ------
    InputError
        If n is no multiple of 4.
    """
    if n < 4 or n % 4:
        raise InputError(f"n is {n}; wanted a multiple of 4")
    box = lattice((2 * n, n, n), size=(16.0, 8.0, 8.0))
    kept = np.ones((n, n, 2 * n), bool)
    quarter = slice(n // 4, 3 * n // 4)
    kept[quarter, quarter, 3 * n // 4 : 5 * n // 4] = False
    cubes = box.cells["hexahedron"][kept.ravel()]
    water = with_used_points(replace(box, cells={"hexahedron": cubes}))
    rotor = _rotor(n_blades)
    rim = rotor.cells["hexahedron"] + len(water.points)
    hub = rotor.cells["wedge"] + len(water.points)
    n_water = len(water.cells["hexahedron"])
    body = np.repeat([0, 1], [n_water, len(rim) + len(hub)]).astype(np.int32)
    return Shape(
        points=np.concatenate([water.points, rotor.points]),
        cells={"hexahedron": np.concatenate([water.cells["hexahedron"], rim]), "wedge": hub},
        cell_fields={"body": body},
    )


def _wrapped(n_around: int, n_up: int) -> IntArray:
    """Return the quads of a closed band of rings."""
    ring = np.arange(n_around)
    flat = np.stack([ring, (ring + 1) % n_around], axis=1)
    quad = np.concatenate([flat, flat[:, ::-1] + n_around], axis=1)
    return (quad + (np.arange(n_up) * n_around)[:, None, None]).reshape(-1, 4)


def _grid_quads(ids: IntArray) -> IntArray:
    """Return the quads of a table of point ids."""
    corners = [ids[:-1, :-1], ids[:-1, 1:], ids[1:, 1:], ids[1:, :-1]]
    return np.stack(corners, axis=-1).reshape(-1, 4)


def _fan(first: int, n_around: int, middle: int) -> IntArray:
    """Return the triangles between a ring of points and its middle."""
    ring = np.arange(n_around)
    triangles = [first + ring, first + (ring + 1) % n_around, np.full(n_around, middle)]
    return np.stack(triangles, axis=1).astype(np.int32)


def _rotor(n_blades: int) -> Shape:
    """Return a disc of one ring of hexahedra round a hub of wedges, its axis along x."""
    angle = 2 * np.pi * np.arange(n_blades) / n_blades
    circle = np.stack([np.cos(angle), np.sin(angle)], axis=1)
    points = np.concatenate([1.6 * circle, 0.5 * circle, [[0.0, 0.0]]])
    ring = np.arange(n_blades)
    after = (ring + 1) % n_blades
    rim = np.stack([ring, after, after + n_blades, ring + n_blades], axis=1)
    hub = _fan(n_blades, n_blades, 2 * n_blades)
    disc = extrude(Shape(points, {"quad": rim, "triangle": hub}), np.linspace(7.6, 8.4, 3))
    a, b, h = disc.points.T
    return replace(disc, points=np.stack([h, a + 4.0, b + 4.0], axis=1))
