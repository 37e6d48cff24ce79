"""From what a user asks to the one value a method takes: every check at one gate."""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial
from math import isfinite, prod
from typing import TYPE_CHECKING, Any, TypeAlias, cast, get_args

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.curve import Curve, CurveSlice, curve_slice, mesh_slice
from sfcpart.dtypes import Array, FloatArray, Int64Array
from sfcpart.errors import InputError, PartitionError, SfcpartError, WeightError
from sfcpart.files.weights_file import is_cost_file, read_costs
from sfcpart.graph import CellGraph, cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.methods.problem import Cuts, Problem
from sfcpart.slices.gate import agreed
from sfcpart.slices.graph_slice import graph_slice
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.weights import (
    FACE_WEIGHTS,
    FaceWeight,
    WeightSpec,
    cell_weights,
    counts_faces,
    groups_from_boundaries,
    groups_from_field,
    groups_from_pairs,
    join_groups,
    quantise,
    quantise_limits,
)

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm

__all__ = ["Weights", "held_of", "part_speeds", "plan_problem", "weights_of"]

Weights: TypeAlias = ArrayLike | str | WeightSpec | Sequence[str | WeightSpec] | None
"""One number a cell, or one or more specifications (or files of costs) that are multiplied."""


def held_of(mesh: Mesh | MeshSlice, comm: Comm | None = None) -> MeshSlice:
    """Return a mesh as what this rank holds of it (collective if there are several ranks).

    A mesh with a communicator is this rank's slice of the cells, of which nothing else is known:
    neighbours on other ranks least of all.
    """
    if isinstance(mesh, MeshSlice):
        return mesh
    if comm is None:
        return MeshSlice.whole(mesh)
    counts = np.concatenate(comm.allgather(np.array([mesh.n_cells], np.int64)))
    return MeshSlice(mesh, comm, np.concatenate(([0], np.cumsum(counts))), mesh.n_points)


def plan_problem(
    mesh: Mesh | MeshSlice,
    n_parts: int,
    *,
    tolerance: float,
    weights: Weights,
    speeds: ArrayLike | None,
    limit_weights: Weights,
    limits: ArrayLike | None,
    levels: Sequence[int] | None,
    together: ArrayLike | str | Sequence[str] | None,
    pairs: ArrayLike | None,
    periodic: Sequence[tuple[str, str]],
    face_weight: FaceWeight,
    seed: int,
    comm: Comm | None = None,
    cuts: Cuts = "balanced",
) -> Problem:
    """Check what was asked and cast it into a `Problem`; see `sfcpart.split` for the meanings.

    With several ranks each holds a slice of the cells, and of what has a row a cell; what is
    wrong on one rank is raised on all.
    """
    given, held = mesh, held_of(mesh, comm)
    comm, mesh = held.comm, held.mesh
    wish: dict[str, Any] = {}
    second: Array | None = None
    work = weights_of(held, weights)
    limited = weights_of(held, limit_weights)
    error = None
    try:
        n_parts = _whole(n_parts, "n_parts")
        _check_part_count(n_parts, held.n_cells)
        second = _second_weight(held, limited, limits)
        wish = {
            "part_speed": part_speeds(speeds, n_parts),
            "tolerance": _tolerance(tolerance),
            "level_sizes": _levels(levels, n_parts),
            "face_weight": _face_weight(face_weight),
            "seed": _whole(seed, "seed", least=0),
            "cuts": _cuts(cuts),
        }
    except SfcpartError as caught:
        error = caught
    comm.check(error)
    whole: dict[str, Any] = {"comm": comm, "first_gid": held.first_gid}
    return Problem(
        centers=mesh.centers,
        n_parts=n_parts,
        graph=lambda: _graph_of(given, held),
        place=partial(_place, mesh),
        group=_groups(held, together, pairs, periodic),
        **_work(work, **whole),
        **_limits(second, limits, n_parts, **whole),
        **wish,
        **whole,
    )


def _graph_of(given: Mesh | MeshSlice, held: MeshSlice) -> CellGraph:
    """Return the cell graph of the cells here (collective); that of a slice is a `GraphSlice`."""
    error = None
    if held.groups is None and held.n_local != held.n_cells:
        error = InputError(
            "the cell graph of a mesh with `comm` is not known across ranks; give the slices of "
            "a mesh instead (sfcpart.read_slice)"
        )
    held.comm.check(error)
    return cell_graph(given) if isinstance(given, Mesh) else cast(CellGraph, graph_slice(given))


def _place(mesh: Mesh, centers: FloatArray, *, curve: Curve, comm: Comm) -> CurveSlice:
    """Return the curve through centres; that of the mesh's own is kept on the mesh."""
    if centers is mesh.centers:
        return mesh_slice(mesh, curve=curve, comm=comm)
    return curve_slice(centers, curve=curve, comm=comm)


def weights_of(mesh: Mesh | MeshSlice, weights: Weights) -> Array | None:
    """Return one number for each cell held here, or None for 1 each (collective).

    Raises
    ------
    WeightError
        If the array has another length, or a specification cannot be met; on all ranks alike.
    """
    if weights is None:
        return None
    held = held_of(mesh)
    weights = _with_costs_read(weights, held)
    graph = _graph_of(mesh, held) if counts_faces(weights, held.mesh) else None
    error, found = None, None
    try:
        found = cell_weights(held.mesh, weights, graph=graph)
    except SfcpartError as caught:
        error = caught
    held.comm.check(error)
    return found


def _with_costs_read(weights: Any, held: MeshSlice) -> Any:
    """Put what files of costs hold in place of their names (collective)."""
    texts = [weights] if isinstance(weights, str) else weights
    specs: list[Any] = list(texts) if isinstance(texts, list | tuple) else []
    fields = held.mesh.cell_fields
    files = [isinstance(s, str) and is_cost_file(s) and s not in fields for s in specs]
    if not any(files):
        return weights
    error, found = None, []
    try:
        for spec, is_file in zip(specs, files, strict=True):
            found.append(read_costs(spec.strip()).spec if is_file else spec)
    except SfcpartError as caught:
        error = caught
    held.comm.check(error)
    return found


def part_speeds(speeds: ArrayLike | None, n_parts: int) -> FloatArray:
    """Return the relative speed of each part, (n_parts,) float64; 1 each by default.

    Raises
    ------
    WeightError
        If there is not one positive finite number for each part.
    """
    if speeds is None:
        return np.ones(n_parts)
    array = np.asarray(speeds, np.float64)
    if array.shape != (n_parts,):
        raise WeightError(
            f"speeds have shape {array.shape}; wanted one number for each of the {n_parts} parts"
        )
    wrong = np.flatnonzero(~((array > 0) & np.isfinite(array)))
    if len(wrong):
        raise WeightError(
            f"the speed of part {wrong[0]} is {array[wrong[0]]}; wanted finite numbers above 0"
        )
    return array


def _are_texts(weights: object) -> bool:
    """Tell whether these are specifications rather than numbers."""
    return isinstance(weights, list | tuple) and any(isinstance(item, str) for item in weights)


def _whole(value: object, name: str, *, least: int = 1) -> int:
    """Return a whole number of at least `least`."""
    if isinstance(value, bool) or not isinstance(value, int | np.integer) or value < least:
        raise InputError(f"{name} is {value!r}; wanted a whole number, {least} or more")
    return int(value)


def _check_part_count(n_parts: int, n_cells: int) -> None:
    """Refuse parts that would stay empty."""
    if n_parts > n_cells:
        raise PartitionError(
            f"{n_parts} parts were asked for, but the mesh has {n_cells} cells; "
            f"ask for at most {n_cells}, or some parts would be empty"
        )


def _tolerance(tolerance: float) -> float:
    """Return a finite tolerance >= 0."""
    if (
        not isinstance(tolerance, int | float | np.number)
        or not isfinite(tolerance)
        or tolerance < 0
    ):
        raise InputError(f"tolerance is {tolerance!r}; wanted a number >= 0, such as 0.03 for 3 %")
    return float(tolerance)


def _face_weight(face_weight: FaceWeight) -> FaceWeight:
    """Return a known way to weigh faces."""
    if face_weight not in FACE_WEIGHTS:
        raise InputError(f"face_weight is {face_weight!r}; wanted one of {', '.join(FACE_WEIGHTS)}")
    return face_weight


def _cuts(cuts: Cuts) -> Cuts:
    """Return a known wish for the cuts."""
    if cuts not in get_args(Cuts):
        raise InputError(f"cuts is {cuts!r}; wanted one of {', '.join(get_args(Cuts))}")
    return cuts


def _levels(levels: Sequence[int] | None, n_parts: int) -> tuple[int, ...]:
    """Return nested level sizes whose product is the number of parts."""
    if levels is None:
        return (n_parts,)
    sizes = tuple(_whole(size, "a level's size") for size in levels)
    if prod(sizes) != n_parts or not sizes:
        text = "x".join(map(str, sizes)) or "none"
        raise InputError(f"levels {text} make {prod(sizes)} parts; wanted {n_parts}")
    return sizes


def _second_weight(held: MeshSlice, weight: Array | None, limits: ArrayLike | None) -> Array | None:
    """Return the second weight of each cell if it is limited, 1 each by default."""
    if limits is None and weight is not None:
        raise WeightError("a second weight was given without a limit; give both or none")
    if limits is None:
        return None
    return np.ones(held.n_local, np.int64) if weight is None else weight


def _work(weight: Array | None, *, comm: Comm, first_gid: int) -> dict[str, Any]:
    """Return the quantised work of each cell and its unit, nothing if all weigh 1."""
    if weight is None:
        return {}
    work = quantise(weight, comm=comm, first_gid=first_gid)
    return {"weight": work.values, "weight_unit": work.unit}


def _limits(
    weight: Array | None, limits: ArrayLike | None, n_parts: int, *, comm: Comm, first_gid: int
) -> dict[str, Any]:
    """Return the quantised second weight, the most of it each part may hold, and their unit."""
    if weight is None:
        return {}
    most = np.asarray(limits, np.float64)
    if most.shape not in ((), (1,), (n_parts,)):
        raise WeightError(
            f"limits have shape {most.shape}; wanted one number, or one for each of "
            f"the {n_parts} parts"
        )
    second = quantise(weight, comm=comm, first_gid=first_gid, what="limited weight")
    return {
        "limit_weight": second.values,
        "part_limit": quantise_limits(np.broadcast_to(most, (n_parts,)), second.exponent),
        "limit_unit": second.unit,
    }


def _groups(
    held: MeshSlice,
    together: ArrayLike | str | Sequence[str] | None,
    pairs: ArrayLike | None,
    periodic: Sequence[tuple[str, str]],
) -> Int64Array | None:
    """Unite all that must stay together, None if all cells are free (collective)."""
    fields = agreed(held.comm, lambda: _checked_together(held.mesh, together))
    found = [groups_from_field(values, held=held) for values in fields]
    if pairs is not None:
        found.append(groups_from_pairs(pairs, held=held))
    found += [groups_from_boundaries(held, sides) for sides in periodic]
    return join_groups(*found, held=held) if found else None


def _checked_together(
    mesh: Mesh, together: ArrayLike | str | Sequence[str] | None
) -> list[ArrayLike]:
    """Return arrays with one value a cell."""
    fields = _together_values(mesh, together)
    for values in fields:
        if np.shape(values) != (mesh.n_cells,):
            raise WeightError(
                f"the group field has shape {np.shape(values)}; wanted one number for each of "
                f"the {mesh.n_cells} cells"
            )
    return fields


def _together_values(
    mesh: Mesh, together: ArrayLike | str | Sequence[str] | None
) -> list[ArrayLike]:
    """Return the arrays behind what was given: field names, or the numbers themselves."""
    if together is None:
        return []
    names = [together] if isinstance(together, str) else together
    if not _are_texts(names):
        return [together]
    return [_cell_field(mesh, str(name)) for name in names]  # type: ignore[union-attr]


def _cell_field(mesh: Mesh, name: str) -> Array:
    """Return a cell field by name."""
    if name not in mesh.cell_fields:
        known = ", ".join(sorted(mesh.cell_fields)) or "none"
        raise WeightError(f"there is no cell field {name!r}; the mesh has {known}")
    return mesh.cell_fields[name]
