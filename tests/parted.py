"""Meshes of every sort with a split and its exchange lists, for tests of files."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any

import numpy as np

from sfcpart.graph import cell_graph
from sfcpart.halo import Halo, build_halo
from sfcpart.mesh.channel import channel_mixed, channel_section
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.refined import refined_box
from sfcpart.mesh.shapes import jittered_tets, truncated_octahedra
from sfcpart.mesh.structures import pier_shell
from sfcpart.partition import Partition

__all__ = ["SAMPLES", "Parted", "parted", "sliced"]


@dataclass(frozen=True, eq=False)
class Parted:
    """A mesh, its parts and its exchange lists."""

    mesh: Mesh
    partition: Partition
    halo: Halo


def _with_fields(mesh: Mesh) -> Mesh:
    """Add a scalar and a vector cell field, and point fields where there are points."""
    cell = {"depth": np.arange(mesh.n_cells) / 7, "flow": np.ones((mesh.n_cells, 3), np.float32)}
    point = {"wet": np.arange(mesh.n_points, dtype=np.int32) % 5} if mesh.points is not None else {}
    return Mesh(
        **{name: getattr(mesh, name) for name in ("points", "kind", "indptr", "indices")},
        **{name: getattr(mesh, name) for name in ("polyhedra", "faces", "boundary")},
        given_center=mesh.given_center,
        given_measure=mesh.given_measure,
        cell_fields=cell,
        point_fields=point,
    )


def _hybrid() -> Mesh:
    """Make a mesh of a hexahedron and a polyhedron (a cube written by its faces)."""
    x, y, z = np.meshgrid([0.0, 1.0, 2.0], [0.0, 1.0], [0.0, 1.0], indexing="ij")
    points = np.stack([x.ravel(), y.ravel(), z.ravel()], axis=1)

    def number(i: int, j: int, k: int) -> int:
        return 4 * i + 2 * j + k

    ring = [(0, 0), (1, 0), (1, 1), (0, 1)]
    left = [[number(i, j, k) for i, j in ring] for k in (0, 1)]
    low, high = ([number(1 + i, j, k) for i, j in ring] for k in (0, 1))
    sides = [[low[a], low[(a + 1) % 4], high[(a + 1) % 4], high[a]] for a in range(4)]
    faces = [low[::-1], high, *sides]
    return Mesh.from_arrays(points, [("hexahedron", [left[0] + left[1]]), ("polyhedron", [faces])])


SAMPLES: dict[str, Callable[[], Mesh]] = {
    "tets": lambda: jittered_tets((4, 4, 3)).to_mesh(),
    "mixed": lambda: channel_mixed((8, 4)).to_mesh(),
    "section": lambda: channel_section(12, 4).to_mesh(),
    "shell": lambda: pier_shell(12, 5).to_mesh(),
    "polyhedra": lambda: truncated_octahedra((3, 2, 2)).to_mesh(),
    "hybrid": _hybrid,
    "faces": lambda: refined_box(4).to_mesh(),
    "centers": lambda: Mesh.from_centers(np.random.default_rng(3).random((40, 2))),
}
"""Meshes by name; "faces" and "centers" have no points."""


def parted(name: str, *, n_parts: int = 4, **options: Any) -> Parted:
    """Split a sample into slices and build its lists; cells are ordered along their last axis."""
    mesh = _with_fields(SAMPLES[name]())
    return sliced(mesh, n_parts=n_parts, **options)


def sliced(mesh: Mesh, *, n_parts: int, **options: Any) -> Parted:
    """Split a mesh into slices of equal numbers of cells along its longest axis."""
    longest = int(np.argmax(np.ptp(mesh.centers, axis=0)))
    order = np.lexsort((*mesh.centers.T, mesh.centers[:, longest]))
    cell_part = np.empty(mesh.n_cells, np.int32)
    cell_part[order] = np.arange(mesh.n_cells) * n_parts // mesh.n_cells
    partition = Partition.from_array(cell_part, n_parts)
    if mesh.points is None and mesh.faces is None:
        halo = build_halo(mesh, None, partition, order=order, layers=0)
    else:
        halo = build_halo(mesh, cell_graph(mesh), partition, order=order, **options)
    return Parted(mesh, partition, halo)
