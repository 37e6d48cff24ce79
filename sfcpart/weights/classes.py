"""How many of each class of cells every part holds: what measured seconds are explained by.

A class is a label: a kind of cell (`tetra`), `cell`, `face` (each face of each cell, inner and
outer), `FIELD:VALUE` (cells with that whole number or text in a cell field), `sum:FIELD` (the sum
of a field, such as particles a cell), `rank` (1 a part: what a rank costs whatever it holds).
Cost: O(n_cells) each, and the cell graph for faces.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array
from sfcpart.errors import InputError, WeightError
from sfcpart.mesh.kinds import KINDS
from sfcpart.mesh.mesh import Mesh
from sfcpart.weights.cells import cell_weights, field_values, region_label

if TYPE_CHECKING:
    from sfcpart.graph import CellGraph

__all__ = ["count_classes"]

_MOST = 1000  # more values than this are a field of numbers, not of classes


def count_classes(
    mesh: Mesh,
    cell_part: Int32Array,
    *,
    n_parts: int,
    by: str | Sequence[str] = "kind",
    graph: Callable[[], CellGraph] | None = None,
) -> dict[str, FloatArray]:
    """Count the classes of cells in every part.

    Parameters
    ----------
    mesh : Mesh
    cell_part : (n_cells,) int32
    n_parts : int
    by : str or sequence of str
        "kind", "cell", "face", "rank", the name of a cell field whose values are classes, or
        "sum:FIELD".
    graph : callable, optional
        Returns the cell graph; needed for faces.

    Returns
    -------
    dict of str to (n_parts,) float64
        By label of the class, in the order of `by`.

    Raises
    ------
    InputError, WeightError
        If a field is missing, holds too many values to be classes, or something is named twice.

    Examples
    --------
    >>> centers = [[0.0, 0.0], [1.0, 0.0], [2.0, 0.0]]
    >>> mesh = Mesh.from_centers(centers, cell_fields={"zone": [1, 1, 4]})
    >>> parts = np.array([0, 1, 1], np.int32)
    >>> {k: v.tolist() for k, v in count_classes(mesh, parts, n_parts=2, by="zone").items()}
    {'zone:1': [1.0, 1.0], 'zone:4': [0.0, 1.0]}
    """
    names = [by] if isinstance(by, str) else list(by)
    found: dict[str, FloatArray] = {}
    for name in names:
        for label, amount in _amounts(mesh, name, graph):
            if label in found:
                raise InputError(f"class {label!r} is counted twice; name each thing once")
            if amount is None:
                found[label] = np.ones(n_parts)
            else:
                counts = np.bincount(cell_part, amount, minlength=n_parts)
                found[label] = counts.astype(np.float64)
    return found


def _amounts(
    mesh: Mesh, name: str, graph: Callable[[], CellGraph] | None
) -> list[tuple[str, Array | None]]:
    """Return the classes a word stands for, with how much of each every cell is."""
    if name == "rank":
        return [(name, None)]
    if name == "cell":
        return [(name, np.ones(mesh.n_cells))]
    if name == "face":
        return [(name, cell_weights(mesh, "face=1", graph=graph))]
    if name == "kind":
        return [(KINDS[int(code)].name, mesh.kind == code) for code in np.unique(mesh.kind)]
    head, _, field = name.partition(":")
    if head == "sum" and field and name not in mesh.cell_fields:
        return [(name, _summable(mesh, field))]
    return _regions(mesh, name)


def _summable(mesh: Mesh, field: str) -> Array:
    """Return a field of finite numbers >= 0."""
    values = np.asarray(field_values(mesh, field), np.float64)
    wrong = np.flatnonzero(~(np.isfinite(values) & (values >= 0)))
    if len(wrong):
        raise WeightError(
            f"cell {wrong[0]} has {field} {values[wrong[0]]}; wanted finite numbers >= 0"
        )
    return values


def _regions(mesh: Mesh, name: str) -> list[tuple[str, Array | None]]:
    """Return the values of a field as classes."""
    values = field_values(mesh, name, kinds="biufUS")
    labels, place = np.unique(values, return_inverse=True)
    if len(labels) > _MOST:
        raise InputError(
            f"cell field {name!r} has {len(labels)} values; wanted at most {_MOST} classes "
            f"(or sum:{name}, if it is an amount)"
        )
    return [(f"{name}:{region_label(v, name)}", place == k) for k, v in enumerate(labels)]
