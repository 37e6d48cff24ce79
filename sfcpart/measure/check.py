"""What can be wrong with cells and points, looked up without the cell graph; over ranks.

A cell has no measure if it is below 1e-15 of its longest edge squared or cubed (rounding). Solids
are inverted if their signed measure is negative. Two kinds of cells have no agreed turn - wedges,
whose corner order differs from program to program, and plane cells, which may all run clockwise -
and count as inverted where they turn against most of their kind (common practice, no source).

All functions take a mesh, or a slice of one: then all ranks call together. Sums are in fixed
point, medians found by their bits, so that no figure depends on the number of ranks.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from sfcpart.dtypes import BoolArray, FloatArray
from sfcpart.errors import MeshError
from sfcpart.kernels.threads import run_ranges
from sfcpart.measure.shape import extent_of
from sfcpart.mesh.kinds import KINDS
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.directory import cut
from sfcpart.slices.fixed import fixed_sum
from sfcpart.slices.gate import agreed
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import block_bounds
from sfcpart.slices.select import median

__all__ = [
    "CellCheck",
    "Offenders",
    "check_cells",
    "count_kinds",
    "default_tolerance",
    "held_of",
    "mesh_extent",
    "unused_points",
    "used_points",
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
    def of(cls, faulty: BoolArray, held: MeshSlice | None = None) -> Offenders:
        """Count the marked rows: of an array, or of the cells of all ranks (collective)."""
        rows = np.flatnonzero(faulty)
        if held is None:
            return cls(len(rows), tuple(rows[:_FEW].tolist()))
        count = int(held.comm.allreduce(np.array([len(rows)], np.int64))[0])
        before = int(held.comm.exscan(np.array([len(rows)], np.int64))[0])
        first = rows[: max(0, _FEW - before)].astype(np.int64) + held.first_gid
        return cls(count, tuple(np.concatenate(held.comm.allgather(first)).tolist()))


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


def count_kinds(mesh: Mesh | MeshSlice) -> dict[str, int]:
    """Count the cells of each kind.

    Parameters
    ----------
    mesh : Mesh or MeshSlice

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
    held = held_of(mesh)
    total = held.comm.allreduce(np.bincount(held.mesh.kind, minlength=256)).tolist()
    pairs = sorted(((n, code) for code, n in enumerate(total) if n), key=lambda p: (-p[0], p[1]))
    return {KINDS[code].name: count for count, code in pairs}


def held_of(mesh: Mesh | MeshSlice) -> MeshSlice:
    """Return a mesh as the slice of the only rank."""
    return mesh if isinstance(mesh, MeshSlice) else MeshSlice.whole(mesh)


def check_cells(mesh: Mesh | MeshSlice) -> CellCheck:
    """Look for faulty cells and measure ranges.

    Parameters
    ----------
    mesh : Mesh or MeshSlice

    Returns
    -------
    CellCheck

    Raises
    ------
    MeshError
        If a cell is so large that its size overflows.

    Notes
    -----
    O(edges of cells), threaded; 33 bytes a cell beside the mesh's own geometry. Over ranks about
    40 small reductions, of at most 4 kB.

    Examples
    --------
    >>> points = [[0, 0], [4, 0], [0, 3], [8, 0], [4, 3]]
    >>> mesh = Mesh.from_arrays(points, {"triangle": [[0, 1, 2], [0, 1, 3], [1, 4, 2]]})
    >>> check = check_cells(mesh)
    >>> check.no_measure, check.measure["largest"]
    (Offenders(count=1, first=(1,)), 6.0)
    """
    held = held_of(mesh)
    comm, mesh = held.comm, held.mesh
    measure = mesh.measures
    if mesh.points is None:
        none = Offenders(0, ())
        empty = Offenders.of(measure == 0, held)
        return CellCheck(empty, none, none, (), _ranges(measure, held), None, -1, None, None)
    shortest, longest = _edges(mesh)
    agreed(comm, lambda: _check_finite(measure, longest, held.first_gid))
    flat = measure <= _NO_MEASURE * longest**mesh.dim
    inverted, turned = _inverted(held, flat)
    sound = shortest > 0
    stretch = np.divide(longest, shortest, out=np.zeros_like(longest), where=sound)
    some = bool(comm.allreduce(np.array([sound.any()]), "max")[0])
    least = comm.allreduce(shortest[sound].min(initial=np.inf, keepdims=True), "min")
    most = comm.allreduce(np.array([longest.max(initial=0), stretch.max(initial=0)]), "max")
    middle = median(stretch[sound], comm=comm)
    return CellCheck(
        no_measure=Offenders.of(flat, held),
        inverted=Offenders.of(inverted, held),
        collapsed=Offenders.of(~sound, held),
        all_turned=turned,
        measure=_ranges(measure, held),
        stretch={"median": middle, "largest": float(most[1])} if some else None,
        most_stretched=_first_cell(stretch == most[1], held) if some else -1,
        shortest_edge=float(least[0]) if some else None,
        longest_edge=float(most[0]),
    )


def _first_cell(marked: BoolArray, held: MeshSlice) -> int:
    """Return the lowest marked cell of all ranks."""
    cell = held.first_gid + np.flatnonzero(marked)[:1]
    lowest = cell.min(initial=held.n_cells, keepdims=True)
    return int(held.comm.allreduce(lowest, "min")[0])


def _edges(mesh: Mesh) -> tuple[FloatArray, FloatArray]:
    """Measure the shortest and longest edge of each cell."""
    from sfcpart.kernels.mesh.edges import edge_lengths

    shortest, longest = np.empty(mesh.n_cells), np.empty(mesh.n_cells)
    run_ranges(edge_lengths, mesh.n_cells, mesh.points, mesh.cell_arrays(), shortest, longest)
    return shortest, longest


def _inverted(held: MeshSlice, flat: BoolArray) -> tuple[BoolArray, tuple[str, ...]]:
    """Mark inverted cells; name the kinds of which every cell is."""
    mesh = held.mesh
    negative = (mesh.signed_measures < 0) & ~flat
    kinds = [mesh.kind[~flat], mesh.kind[negative]]
    counts = held.comm.allreduce(np.stack([np.bincount(k, minlength=256) for k in kinds]))
    turned = []
    for code in np.flatnonzero(counts[0]).tolist():
        total, against = counts[:, code].tolist()
        if (mesh.dim == 2 or code in _WEDGES) and 2 * against > total:
            negative ^= (mesh.kind == code) & ~flat
        elif against == total:
            turned.append(KINDS[code].name)
    return negative, tuple(turned)


def _check_finite(measure: FloatArray, longest: FloatArray, first_gid: int) -> None:
    """Refuse cells whose size is beyond the numbers."""
    beyond = ~(np.isfinite(measure) & np.isfinite(longest))
    if beyond.any():
        raise MeshError(
            f"cell {first_gid + int(np.argmax(beyond))} is too large to be measured: its edges or "
            "its size exceed 1e308; scale the mesh down"
        )


def _ranges(values: FloatArray, held: MeshSlice) -> dict[str, float]:
    """Sum up values of the cells of all ranks in a few figures."""
    comm = held.comm
    return {
        "sum": fixed_sum(values, n_values=held.n_cells, comm=comm),
        "smallest": float(comm.allreduce(values.min(initial=np.inf, keepdims=True), "min")[0]),
        "median": median(values, comm=comm),
        "largest": float(comm.allreduce(values.max(initial=0, keepdims=True), "max")[0]),
    }


def used_points(mesh: Mesh) -> BoolArray:
    """Mark the points that cells list, kept on the mesh."""
    return mesh.keep("used points", lambda: _used_points(mesh))


def _used_points(mesh: Mesh) -> BoolArray:
    """Mark them."""
    used = np.zeros(mesh.n_points, np.bool_)
    used[mesh.indices] = True
    return used


def unused_points(mesh: Mesh | MeshSlice) -> int:
    """Count the points that no cell lists.

    Parameters
    ----------
    mesh : Mesh or MeshSlice

    Returns
    -------
    int
        0 for meshes without points.

    Notes
    -----
    Over ranks 8 bytes a local point are sent to the ranks that keep a block of the points each.

    Examples
    --------
    >>> unused_points(Mesh.from_arrays([[0, 0], [9, 9], [1, 0], [0, 1]], {"triangle": [[0, 2, 3]]}))
    1
    """
    held = held_of(mesh)
    comm, bounds = held.comm, block_bounds(held.n_points, held.comm.size)
    gid = np.asarray(held.global_points(np.flatnonzero(used_points(held.mesh))), np.int64)
    met = np.zeros(int(bounds[comm.rank + 1] - bounds[comm.rank]), np.bool_)
    for piece in comm.alltoall(cut(gid, np.searchsorted(gid, bounds))):
        met[piece - bounds[comm.rank]] = True
    return held.n_points - int(comm.allreduce(np.array([np.count_nonzero(met)], np.int64))[0])


def mesh_extent(held: MeshSlice) -> tuple[FloatArray, FloatArray]:
    """Return the box around the points that cells list, or the centres (collective)."""
    if held.mesh.points is None:
        return extent_of(held.mesh.centers, held.comm)
    used = used_points(held.mesh)
    return extent_of(held.mesh.points if used.all() else held.mesh.points[used], held.comm)


def default_tolerance(mesh: Mesh | MeshSlice, shortest_edge: float | None) -> float:
    """Choose a distance below which two points are taken to be one.

    Parameters
    ----------
    mesh : Mesh or MeshSlice
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
    low, high = mesh_extent(held_of(mesh))
    diagonal = math.hypot(*(high - low).tolist())
    return min(1e-9 * diagonal, 0.1 * (shortest_edge if shortest_edge else np.inf))
