"""Building blocks for meshes made by rule: lattices, tets, space-filling polyhedra.

Everything is numpy over index arithmetic, so that 10^7 cells take a second or two. The Skerry
Channel, the invented scenario of all examples, is put together from these in
`sfcpart.mesh.channel`; boxes with hanging nodes are in `sfcpart.mesh.refined`.

Source: the split of a cube into six tets along its diagonal is due to H. W. Kuhn (Some
combinatorial lemmas in topology, IBM J. Res. Dev. 4:518, 1960), recalled from memory.
"""

from __future__ import annotations

from collections.abc import Sequence
from itertools import permutations, product

import numpy as np

from sfcpart.dtypes import COORDINATE, Array, FloatArray, IntArray, index_dtype
from sfcpart.errors import InputError
from sfcpart.mesh.shape import Shape

__all__ = [
    "box_corners",
    "grid_points",
    "jittered_tets",
    "kuhn_tets",
    "lattice",
    "truncated_octahedra",
]

LARGEST_JITTER = 1.0 / 6.0
"""Below this no tet of a jittered lattice can turn over (diagonal dominance of its edges)."""


def lattice(counts: Sequence[int], *, size: Sequence[float] | None = None) -> Shape:
    """Return a box of equal squares (two counts) or cubes (three counts).

    Parameters
    ----------
    counts : 2 or 3 int
        Cells along each axis; the first axis runs fastest in the numbering.
    size : 2 or 3 float, optional
        Edge lengths of the box; unit cells by default.

    Raises
    ------
    InputError
        If a count is below 1 or there are not 2 or 3 of them.

    Examples
    --------
    >>> box = lattice((4, 3, 2))
    >>> box.n_cells, box.points.shape
    (24, (60, 3))
    """
    numbers = _checked_counts(counts)
    lengths = [float(n) for n in numbers] if size is None else [float(s) for s in size]
    axes = [np.linspace(0.0, s, n + 1) for s, n in zip(lengths, numbers, strict=True)]
    corners = box_corners(numbers)
    name = "quad" if len(numbers) == 2 else "hexahedron"
    return Shape(points=grid_points(axes), cells={name: corners})


def jittered_tets(counts: Sequence[int], *, jitter: float = 0.15, seed: int = 0) -> Shape:
    """Return a box of unit cubes, inner points moved at random, six tets a cube (Kuhn).

    The boundary points stay, so the volume of the whole is the product of the counts.

    Parameters
    ----------
    counts : 3 int
        Cubes along each axis.
    jitter : float
        Largest move along each axis, in cubes; at most 1/6, so that no tet turns over.
    seed : int
        Start of the random numbers.

    Raises
    ------
    InputError
        If the jitter is outside 0..1/6 or the counts are not three numbers >= 1.

    Examples
    --------
    >>> jittered_tets((2, 2, 2)).cells["tetra"].shape
    (48, 4)
    """
    numbers = _checked_counts(counts)
    if len(numbers) != 3:
        raise InputError(f"counts has {len(numbers)} numbers; tets need 3")
    if not 0.0 <= jitter <= LARGEST_JITTER:
        raise InputError(f"jitter is {jitter}; wanted 0 to 1/6, beyond which tets may turn over")
    points = grid_points([np.arange(n + 1, dtype=COORDINATE) for n in numbers])
    block = points.reshape(*(n + 1 for n in reversed(numbers)), 3)
    inner = block[1:-1, 1:-1, 1:-1]
    inner += np.random.default_rng(seed).uniform(-jitter, jitter, inner.shape)
    tets = box_corners(numbers)[:, kuhn_tets()].reshape(-1, 4)
    return Shape(points=points, cells={"tetra": tets})


def truncated_octahedra(counts: Sequence[int]) -> Shape:
    """Return the space-filling cells of a body-centred lattice (8 hexagons, 6 squares each).

    These are the Voronoi cells of the points of a body-centred cubic lattice of edge 4; each has
    volume 32 and centroid at its lattice point. The outer surface is left ragged.

    Parameters
    ----------
    counts : 3 int
        Cubes along each axis; one cell for each cube corner and cube centre taken, so
        2 * product of the counts.

    Examples
    --------
    >>> kelvin = truncated_octahedra((2, 1, 1))
    >>> kelvin.n_cells, len(kelvin.cells["polyhedron"][0])
    (4, 14)
    """
    numbers = _checked_counts(counts)
    corner = np.stack(np.meshgrid(*map(np.arange, numbers), indexing="ij"), -1).reshape(-1, 1, 3)
    center = (4 * corner + np.array([[[0, 0, 0], [2, 2, 2]]])).reshape(-1, 3)
    faces = [center[:, None, :] + face for face in _octahedron_faces()]
    flat = np.concatenate([face.reshape(-1, 3) for face in faces])
    points, inverse = np.unique(flat, axis=0, return_inverse=True)
    ends = np.cumsum([face.shape[0] * face.shape[1] for face in faces])[:-1]
    ids = np.split(inverse.ravel(), ends)
    blocks = [block.reshape(len(center), -1).tolist() for block in ids]
    cells = [[block[i] for block in blocks] for i in range(len(center))]
    return Shape(points=points.astype(COORDINATE), cells={"polyhedron": cells})


def grid_points(axes: Sequence[FloatArray]) -> FloatArray:
    """Return all points of a tensor grid, first axis fastest, (n, dim)."""
    points = np.empty((*(len(axis) for axis in reversed(axes)), len(axes)))
    for k, axis in enumerate(axes):
        points[..., k] = axis.reshape([-1] + [1] * k)
    return points.reshape(-1, len(axes))


def box_corners(counts: Sequence[int]) -> IntArray:
    """Return the corners of every cell of a lattice in VTK's order, (n, 4) or (n, 8)."""
    n_points = int(np.prod([n + 1 for n in counts]))
    dtype = index_dtype(n_points)
    strides = np.cumprod([1, *(n + 1 for n in counts)])[:-1].astype(dtype)
    first: Array = np.zeros((1,) * len(counts), dtype)
    for k, n in enumerate(counts):
        first = first + (np.arange(n, dtype=dtype) * strides[k]).reshape([-1] + [1] * k)
    around: Array = np.array([0, strides[0], strides[0] + strides[1], strides[1]], dtype)
    offsets = around if len(counts) == 2 else np.concatenate([around, around + strides[2]])
    return first.reshape(-1, 1) + offsets


def kuhn_tets() -> IntArray:
    """Return the six tets of a cube as local corner numbers (VTK order), all positive, (6, 4)."""
    number = {(0, 0, 0): 0, (1, 0, 0): 1, (1, 1, 0): 2, (0, 1, 0): 3}
    number |= {(x, y, 1): n + 4 for (x, y, _), n in list(number.items())}
    tets = []
    for walk in permutations(range(3)):
        position, tet = [0, 0, 0], [0]
        for axis in walk:
            position[axis] = 1
            tet.append(number[(position[0], position[1], position[2])])
        even = walk in ((0, 1, 2), (1, 2, 0), (2, 0, 1))
        tets.append(tet if even else [tet[0], tet[2], tet[1], tet[3]])
    return np.array(tets, np.int32)


def _checked_counts(counts: Sequence[int]) -> tuple[int, ...]:
    """Accept two or three counts of at least 1."""
    numbers = tuple(int(n) for n in counts)
    if len(numbers) not in (2, 3) or min(numbers) < 1:
        raise InputError(f"counts is {numbers}; wanted two or three numbers of at least 1")
    return numbers


def _octahedron_faces() -> list[IntArray]:
    """Return the 14 faces of the truncated octahedron about 0, corners in turn, outward."""
    signed = product((0,), (1, -1), (2, -2))
    corners = np.array(sorted({corner for one in signed for corner in permutations(one)}))
    normals = [n for n in product((-1, 0, 1), repeat=3) if sum(map(abs, n)) in (1, 3)]
    faces = []
    for normal in map(np.array, normals):
        height = corners @ normal
        face = corners[height == height.max()]
        side = face[0] - face.mean(axis=0)
        up = np.cross(normal, side)
        away = face - face.mean(axis=0)
        faces.append(face[np.argsort(np.arctan2(away @ up / np.linalg.norm(normal), away @ side))])
    return faces
