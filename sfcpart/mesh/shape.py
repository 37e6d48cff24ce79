"""A mesh made by rule, as plain arrays; sweep it along an axis, leave points out."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from sfcpart.dtypes import COORDINATE, Array, BoolArray, FloatArray, IntArray, index_dtype
from sfcpart.mesh.mesh import BoundaryGroup, Mesh

__all__ = ["Shape", "extrude", "with_used_points"]


@dataclass(frozen=True, eq=False)
class Shape:
    """A mesh made by rule, as plain arrays.

    Attributes
    ----------
    points : (n_points, 2 or 3) float64
    cells : mapping of str to (n, k) int32 or int64
        Blocks by meshio's cell names, in order; "polyhedron" holds a list of lists of faces.
    cell_fields : mapping of str to (n_cells,) array
        In the order of the blocks.
    boundary : mapping of str to (n, k) array
        Named groups of elements one dimension lower.
    """

    points: FloatArray
    cells: Mapping[str, Any]
    cell_fields: Mapping[str, Array] = field(default_factory=dict)
    boundary: Mapping[str, IntArray] = field(default_factory=dict)

    @property
    def n_cells(self) -> int:
        """Number of cells of all blocks."""
        return sum(len(block) for block in self.cells.values())

    def to_mesh(self) -> Mesh:
        """Return the shape as a checked `Mesh`, boundary groups included."""
        return Mesh.from_arrays(
            self.points,
            dict(self.cells),
            cell_fields=dict(self.cell_fields),
            boundary=_boundary_groups(self.boundary),
        )

    def with_shuffled_cells(self, seed: int) -> Shape:
        """Return the shape with the cells of each block in random order: the worst input order."""
        random = np.random.default_rng(seed)
        cells: dict[str, Any] = {}
        orders, start = [], 0
        for name, block in self.cells.items():
            order = random.permutation(len(block))
            cells[name] = _picked(block, order)
            orders.append(order + start)
            start += len(block)
        order = np.concatenate(orders)
        fields = {name: array[order] for name, array in self.cell_fields.items()}
        return replace(self, cells=cells, cell_fields=fields)


def extrude(shape: Shape, heights: Iterable[float]) -> Shape:
    """Sweep a 2-D shape along a third axis: triangles become wedges, quads hexahedra.

    Parameters
    ----------
    shape : Shape
        Triangles and quads in two dimensions.
    heights : m + 1 increasing floats
        Third coordinate of the copies of the points; m layers of cells between them.

    Returns
    -------
    Shape
        The layers of a cell follow each other closely: all of layer 0 of a block, then layer 1.
        Boundary groups of lines become groups of quads; fields are repeated.
    """
    levels = np.asarray(list(heights), COORDINATE)
    n_flat, n_layers = len(shape.points), len(levels) - 1
    points = np.empty((len(levels), n_flat, 3))
    points[:, :, :2] = shape.points
    points[:, :, 2] = levels[:, None]
    dtype = index_dtype(n_flat * len(levels))
    step: Array = (np.arange(n_layers, dtype=dtype) * n_flat)[:, None, None]
    names = {"triangle": "wedge", "quad": "hexahedron"}
    cells = {names[name]: _swept(block, step, n_flat) for name, block in shape.cells.items()}
    sides = {name: _swept_lines(lines, step, n_flat) for name, lines in shape.boundary.items()}
    return Shape(
        points=points.reshape(-1, 3),
        cells=cells,
        cell_fields=_repeated_fields(shape, n_layers),
        boundary=sides,
    )


def with_used_points(shape: Shape) -> Shape:
    """Return the shape without the points that no cell uses (no polyhedra)."""
    used: BoolArray = np.zeros(len(shape.points), bool)
    for block in shape.cells.values():
        used[block] = True
    new: Any = (np.cumsum(used) - 1).astype(index_dtype(len(used)))
    cells = {name: new[block] for name, block in shape.cells.items()}
    sides = {name: new[block] for name, block in shape.boundary.items()}
    return replace(shape, points=shape.points[used], cells=cells, boundary=sides)


def _picked(block: Any, order: Array) -> Any:
    """Return the rows of an array, or the items of a list, in the given order."""
    return block[order] if isinstance(block, np.ndarray) else [block[i] for i in order]


def _swept(block: IntArray, step: Array, n_flat: int) -> IntArray:
    """Join each flat cell to its copy one layer up, for all layers; wedges begin at the top."""
    pair = [block + n_flat, block] if block.shape[1] == 3 else [block, block + n_flat]
    both = np.concatenate(pair, axis=1).astype(step.dtype)
    return (both[None] + step).reshape(-1, both.shape[1])


def _swept_lines(lines: IntArray, step: Array, n_flat: int) -> IntArray:
    """Sweep boundary lines to quads, going round each of them."""
    both = np.concatenate([lines, lines[:, ::-1] + n_flat], axis=1).astype(step.dtype)
    return (both[None] + step).reshape(-1, 4)


def _repeated_fields(shape: Shape, n_layers: int) -> dict[str, Array]:
    """Repeat cell fields for every layer, block by block."""
    ends = np.cumsum([len(block) for block in shape.cells.values()])[:-1]
    return {
        name: np.concatenate([np.tile(piece, n_layers) for piece in np.split(array, ends)])
        for name, array in shape.cell_fields.items()
    }


def _boundary_groups(groups: Mapping[str, IntArray]) -> tuple[Any, ...]:
    """Turn named blocks of lines, triangles or quads into boundary groups."""
    kinds = {1: 1, 2: 3, 3: 5, 4: 9}
    return tuple(
        BoundaryGroup(
            name=name,
            tag=tag,
            kind=np.full(len(block), kinds[block.shape[1]], np.uint8),
            indptr=np.arange(len(block) + 1, dtype=np.int64) * block.shape[1],
            indices=np.ascontiguousarray(block).ravel(),
        )
        for tag, (name, block) in enumerate(groups.items(), start=1)
    )
