"""Kinds of cells: corners and faces of each, by the type codes of the VTK file formats.

Corners come first in a cell's list of points; the mid-side points of quadratic and higher kinds
follow and play no part in faces and measures. Source of codes, corner order and faces: VTK file
formats, chapter "Legacy" and the cell classes it names (an open standard). Faces of 3-D cells
are listed so that they point outward, those of 2-D cells are edges in turn around the cell.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from types import MappingProxyType
from typing import NamedTuple

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import MeshError

__all__ = [
    "KINDS",
    "MAX_CORNERS",
    "MAX_FACES",
    "POLYGON",
    "POLYHEDRON",
    "TETRA",
    "VERTEX",
    "Kind",
    "KindTables",
    "kind_of",
    "kind_tables",
]

VERTEX, POLYGON, TETRA, POLYHEDRON = 1, 7, 10, 42
MAX_FACES, MAX_CORNERS = 8, 6

Faces = tuple[tuple[int, ...], ...]


@dataclass(frozen=True)
class Kind:
    """One kind of cell.

    Attributes
    ----------
    code : int
        VTK type code.
    name : str
        meshio's name.
    dim : int
        Topological dimension, 0 to 3.
    n_corners : int
        Corners of a cell; 0 where it differs from cell to cell (polygon, polyhedron).
    faces : tuple of tuples of int
        Corners of each face (edge in 2-D), as places in the cell's list of points.
    n_nodes : int
        Points of a cell, mid-side points included; 0 where it differs from cell to cell.
    """

    code: int
    name: str
    dim: int
    n_corners: int
    faces: Faces
    n_nodes: int


class KindTables(NamedTuple):
    """What kernels need to know of kinds, as read-only arrays with a row for each VTK code.

    Attributes
    ----------
    dim : (256,) int8
        Topological dimension; -1 for codes unknown.
    n_corners : (256,) int8
    n_nodes : (256,) int8
    face_count : (256,) int8
        Faces of a cell; 0 for polygons and polyhedra.
    face_size : (256, 8) int8
        Corners of each face.
    face_corner : (256, 8, 6) int8
        Places of these corners.
    """

    dim: Array
    n_corners: Array
    n_nodes: Array
    face_count: Array
    face_size: Array
    face_corner: Array


def _ring(n: int) -> Faces:
    """Edges in turn around a polygon of n corners."""
    return tuple((i, (i + 1) % n) for i in range(n))


def _prism(n: int) -> Faces:
    """Faces of a prism whose first n corners, seen from the others, go round clockwise."""
    sides = tuple((i, n + i, n + (i + 1) % n, (i + 1) % n) for i in range(n))
    return (tuple(range(n)), tuple(range(2 * n - 1, n - 1, -1)), *sides)


_PIXEL: Faces = ((0, 1), (1, 3), (3, 2), (2, 0))
_TETRA: Faces = ((0, 1, 3), (1, 2, 3), (2, 0, 3), (0, 2, 1))
_VOXEL: Faces = ((0, 4, 6, 2), (1, 3, 7, 5), (0, 1, 5, 4), (2, 6, 7, 3), (0, 2, 3, 1), (4, 5, 7, 6))
_HEXA: Faces = ((0, 4, 7, 3), (1, 2, 6, 5), (0, 1, 5, 4), (3, 7, 6, 2), (0, 3, 2, 1), (4, 5, 6, 7))
_PYRAMID: Faces = ((0, 3, 2, 1), (0, 1, 4), (1, 2, 4), (2, 3, 4), (3, 0, 4))
_PENTA: Faces = tuple(face[::-1] for face in _prism(5))
_HEXAPRISM: Faces = tuple(face[::-1] for face in _prism(6))

_ROWS: tuple[tuple[int, str, int, int, int, Faces], ...] = (
    # code, name, dim, corners, points, faces
    (1, "vertex", 0, 1, 1, ()),
    (3, "line", 1, 2, 2, ((0,), (1,))),
    (5, "triangle", 2, 3, 3, _ring(3)),
    (7, "polygon", 2, 0, 0, ()),
    (8, "pixel", 2, 4, 4, _PIXEL),
    (9, "quad", 2, 4, 4, _ring(4)),
    (10, "tetra", 3, 4, 4, _TETRA),
    (11, "voxel", 3, 8, 8, _VOXEL),
    (12, "hexahedron", 3, 8, 8, _HEXA),
    (13, "wedge", 3, 6, 6, _prism(3)),
    (14, "pyramid", 3, 5, 5, _PYRAMID),
    (15, "penta_prism", 3, 10, 10, _PENTA),
    (16, "hexa_prism", 3, 12, 12, _HEXAPRISM),
    (21, "line3", 1, 2, 3, ((0,), (1,))),
    (22, "triangle6", 2, 3, 6, _ring(3)),
    (23, "quad8", 2, 4, 8, _ring(4)),
    (24, "tetra10", 3, 4, 10, _TETRA),
    (25, "hexahedron20", 3, 8, 20, _HEXA),
    (26, "wedge15", 3, 6, 15, _prism(3)),
    (27, "pyramid13", 3, 5, 13, _PYRAMID),
    (28, "quad9", 2, 4, 9, _ring(4)),
    (29, "hexahedron27", 3, 8, 27, _HEXA),
    (30, "quad6", 2, 4, 6, _ring(4)),
    (31, "wedge12", 3, 6, 12, _prism(3)),
    (32, "wedge18", 3, 6, 18, _prism(3)),
    (33, "hexahedron24", 3, 8, 24, _HEXA),
    (34, "triangle7", 2, 3, 7, _ring(3)),
    (35, "line4", 1, 2, 4, ((0,), (1,))),
    (42, "polyhedron", 3, 0, 0, ()),
    (68, "VTK_LAGRANGE_CURVE", 1, 2, 0, ((0,), (1,))),
    (69, "VTK_LAGRANGE_TRIANGLE", 2, 3, 0, _ring(3)),
    (70, "VTK_LAGRANGE_QUADRILATERAL", 2, 4, 0, _ring(4)),
    (71, "VTK_LAGRANGE_TETRAHEDRON", 3, 4, 0, _TETRA),
    (72, "VTK_LAGRANGE_HEXAHEDRON", 3, 8, 0, _HEXA),
    (73, "VTK_LAGRANGE_WEDGE", 3, 6, 0, _prism(3)),
    (74, "VTK_LAGRANGE_PYRAMID", 3, 5, 0, _PYRAMID),
)

KINDS: Mapping[int, Kind] = MappingProxyType(
    {
        code: Kind(code, name, dim, corners, faces, nodes)
        for code, name, dim, corners, nodes, faces in _ROWS
    }
)
"""Every kind sfcpart knows, by VTK type code."""

_BY_NAME = {kind.name: kind for kind in KINDS.values()}
_HIGHER = {"line": 68, "triangle": 69, "quad": 70, "tetra": 71, "hexahedron": 72}
_HIGHER |= {"wedge": 73, "pyramid": 74}


def kind_of(name: str) -> Kind:
    """Return the kind with one of meshio's names.

    Parameters
    ----------
    name : str
        "tetra", "hexahedron20", "polygon", "polyhedron12"; higher orders ("tetra35") become the
        VTK kinds of arbitrary order, whose corners come first as well.

    Returns
    -------
    Kind

    Raises
    ------
    MeshError
        If the name is unknown.

    Examples
    --------
    >>> kind_of("wedge").code, kind_of("tetra35").code, kind_of("polyhedron8").code
    (13, 71, 42)
    """
    if name in _BY_NAME:
        return _BY_NAME[name]
    match = re.fullmatch(r"([a-z]+)(\d+)", name)
    base = match[1] if match else ""
    if base in ("polygon", "polyhedron"):
        return _BY_NAME[base]
    if base in _HIGHER:
        return KINDS[_HIGHER[base]]
    known = ", ".join(kind.name for kind in KINDS.values())
    raise MeshError(f"cells of kind {name!r} are not known; known are {known}")


@lru_cache(maxsize=1)
def kind_tables() -> KindTables:
    """Build the tables of all kinds once."""
    dim = np.full(256, -1, np.int8)
    n_corners, n_nodes, face_count = (np.zeros(256, np.int8) for _ in range(3))
    face_size = np.zeros((256, MAX_FACES), np.int8)
    face_corner = np.zeros((256, MAX_FACES, MAX_CORNERS), np.int8)
    for code, kind in KINDS.items():
        dim[code], n_corners[code], n_nodes[code] = kind.dim, kind.n_corners, kind.n_nodes
        face_count[code] = len(kind.faces)
        for i, face in enumerate(kind.faces):
            face_size[code, i] = len(face)
            face_corner[code, i, : len(face)] = face
    tables = KindTables(dim, n_corners, n_nodes, face_count, face_size, face_corner)
    for table in tables:
        table.flags.writeable = False
    return tables
