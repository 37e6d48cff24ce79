"""What can be wrong with cells and points, looked up without the cell graph.

A cell has no measure if it is below 1e-15 of its longest edge squared or cubed (rounding). Solids
are inverted if their signed measure is negative. Two kinds of cells have no agreed turn - wedges,
whose corner order differs from program to program, and plane cells, which may all run clockwise -
and count as inverted where they turn against most of their kind (common practice, no source).
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import BoolArray, FloatArray
from sfcpart.errors import MeshError
from sfcpart.kernels.threads import run_ranges
from sfcpart.mesh.kinds import KINDS
from sfcpart.mesh.mesh import Mesh

__all__ = [
    "CellCheck",
    "Offenders",
    "check_cells",
    "count_kinds",
    "default_tolerance",
    "unused_points",
]

_FEW = 10
_NO_MEASURE = 1e-15
_WEDGES = tuple(code for code, kind in KINDS.items() if kind.name.lower().find("wedge") >= 0)


@dataclass(frozen=True)
class Offenders:
    """Rows with one fault: how many, and the first ten.

    Attributes
    ----------
    count : int
    first : tuple of int
    """

    count: int
    first: tuple[int, ...]

    @classmethod
    def of(cls, faulty: BoolArray) -> Offenders:
        """Count the marked rows."""
        rows = np.flatnonzero(faulty)
        return cls(len(rows), tuple(rows[:_FEW].tolist()))


@dataclass(frozen=True)
class CellCheck:
    """Faults and ranges of cells.

    Attributes
    ----------
    no_measure, inverted, collapsed : Offenders
        Cells without area or volume; cells turned inside out; cells with an edge of no length.
    all_turned : tuple of str
        Kinds of solids of which every cell is inverted: another corner order, not bad cells.
    measure : mapping of str to float
        "sum", "smallest", "median", "largest".
    stretch : mapping of str to float, or None
        Longest over shortest edge of a cell, cells with an edge of no length left out: "median",
        "largest". None for meshes without points.
    most_stretched : int
        Cell with the largest stretch, -1 for none.
    shortest_edge, longest_edge : float or None
        Over all cells, edges of no length left out.
    """

    no_measure: Offenders
    inverted: Offenders
    collapsed: Offenders
    all_turned: tuple[str, ...]
    measure: Mapping[str, float]
    stretch: Mapping[str, float] | None
    most_stretched: int
    shortest_edge: float | None
    longest_edge: float | None


def count_kinds(mesh: Mesh) -> dict[str, int]:
    """Count the cells of each kind.

    Parameters
    ----------
    mesh : Mesh

    Returns
    -------
    dict of str to int
        By meshio's name, most frequent first.

    Examples
    --------
    >>> points = [[0, 0], [1, 0], [1, 1], [0, 1], [2, 0]]
    >>> count_kinds(Mesh.from_arrays(points, {"quad": [[0, 1, 2, 3]], "triangle": [[1, 4, 2]]}))
    {'triangle': 1, 'quad': 1}
    """
    codes, counts = np.unique(mesh.kind, return_counts=True)
    pairs = sorted(zip(counts.tolist(), codes.tolist(), strict=True), key=lambda p: (-p[0], p[1]))
    return {KINDS[code].name: count for count, code in pairs}


def check_cells(mesh: Mesh) -> CellCheck:
    """Look for faulty cells and measure ranges.

    Parameters
    ----------
    mesh : Mesh

    Returns
    -------
    CellCheck

    Raises
    ------
    MeshError
        If a cell is so large that its size overflows.

    Notes
    -----
    O(edges of cells), threaded; 33 bytes a cell beside the mesh's own geometry.

    Examples
    --------
    >>> points = [[0, 0], [4, 0], [0, 3], [8, 0], [4, 3]]
    >>> mesh = Mesh.from_arrays(points, {"triangle": [[0, 1, 2], [0, 1, 3], [1, 4, 2]]})
    >>> check = check_cells(mesh)
    >>> check.no_measure, check.measure["largest"]
    (Offenders(count=1, first=(1,)), 6.0)
    """
    measure = mesh.measures
    if mesh.points is None:
        none = Offenders(0, ())
        empty = Offenders.of(measure == 0)
        return CellCheck(empty, none, none, (), _ranges(measure), None, -1, None, None)
    shortest, longest = _edges(mesh)
    _check_finite(measure, longest)
    flat = measure <= _NO_MEASURE * longest**mesh.dim
    inverted, turned = _inverted(mesh, flat)
    sound = shortest > 0
    stretch = np.divide(longest, shortest, out=np.zeros_like(longest), where=sound)
    return CellCheck(
        no_measure=Offenders.of(flat),
        inverted=Offenders.of(inverted),
        collapsed=Offenders.of(~sound),
        all_turned=turned,
        measure=_ranges(measure),
        stretch=(
            {"median": float(np.median(stretch[sound])), "largest": float(stretch.max())}
            if sound.any()
            else None
        ),
        most_stretched=int(stretch.argmax()) if sound.any() else -1,
        shortest_edge=float(shortest[sound].min()) if sound.any() else None,
        longest_edge=float(longest.max()),
    )


def _edges(mesh: Mesh) -> tuple[FloatArray, FloatArray]:
    """Measure the shortest and longest edge of each cell."""
    from sfcpart.kernels.mesh.edges import edge_lengths

    shortest, longest = np.empty(mesh.n_cells), np.empty(mesh.n_cells)
    run_ranges(edge_lengths, mesh.n_cells, mesh.points, mesh.cell_arrays(), shortest, longest)
    return shortest, longest


def _inverted(mesh: Mesh, flat: BoolArray) -> tuple[BoolArray, tuple[str, ...]]:
    """Mark inverted cells; name the kinds of which every cell is."""
    negative = (mesh.signed_measures < 0) & ~flat
    turned = []
    for code in np.unique(mesh.kind).tolist():
        mine = (mesh.kind == code) & ~flat
        total, against = np.count_nonzero(mine), np.count_nonzero(negative & mine)
        if (mesh.dim == 2 or code in _WEDGES) and 2 * against > total:
            negative ^= mine
        elif total and against == total:
            turned.append(KINDS[code].name)
    return negative, tuple(turned)


def _check_finite(measure: FloatArray, longest: FloatArray) -> None:
    """Refuse cells whose size is beyond the numbers."""
    beyond = ~(np.isfinite(measure) & np.isfinite(longest))
    if beyond.any():
        raise MeshError(
            f"cell {int(np.argmax(beyond))} is too large to be measured: its edges or its size "
            "exceed 1e308; scale the mesh down"
        )


def _ranges(values: FloatArray) -> dict[str, float]:
    """Sum up values in a few figures."""
    return {
        "sum": float(values.sum()),
        "smallest": float(values.min()),
        "median": float(np.median(values)),
        "largest": float(values.max()),
    }


def unused_points(mesh: Mesh) -> int:
    """Count the points that no cell lists.

    Parameters
    ----------
    mesh : Mesh

    Returns
    -------
    int
        0 for meshes without points.

    Examples
    --------
    >>> unused_points(Mesh.from_arrays([[0, 0], [9, 9], [1, 0], [0, 1]], {"triangle": [[0, 2, 3]]}))
    1
    """
    used = np.zeros(mesh.n_points, np.bool_)
    used[mesh.indices] = True
    return mesh.n_points - int(np.count_nonzero(used))


def default_tolerance(mesh: Mesh, shortest_edge: float | None) -> float:
    """Choose a distance below which two points are taken to be one.

    Parameters
    ----------
    mesh : Mesh
        With points.
    shortest_edge : float or None

    Returns
    -------
    float
        1e-9 of the mesh's diagonal, at most a tenth of the shortest edge (common practice, no
        source).

    Examples
    --------
    >>> mesh = Mesh.from_arrays([[0, 0], [3, 0], [0, 4]], {"triangle": [[0, 1, 2]]})
    >>> default_tolerance(mesh, 3.0)
    5e-09
    """
    assert mesh.points is not None
    diagonal = math.hypot(*(mesh.points.max(axis=0) - mesh.points.min(axis=0)).tolist())
    return min(1e-9 * diagonal, 0.1 * (shortest_edge if shortest_edge else np.inf))
