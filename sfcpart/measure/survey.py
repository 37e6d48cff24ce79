"""The look-over of a mesh before a split: what it holds, what is wrong, what it will need."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from sfcpart.dtypes import PART, Array
from sfcpart.graph import CellGraph
from sfcpart.measure.check import (
    CellCheck,
    Offenders,
    check_cells,
    count_kinds,
    default_tolerance,
    mesh_extent,
    unused_points,
)
from sfcpart.measure.cracks import Cracks, find_cracks
from sfcpart.measure.memory import split_memory
from sfcpart.measure.shape import extent_of
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.fixed import fixed_sum
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.pieces import find_pieces

__all__ = ["FieldNote", "GroupNote", "Survey", "survey_mesh", "survey_slice"]

_MANY_ALONE = 0.01


@dataclass(frozen=True)
class GroupNote:
    """A boundary group in short: name, tag (-1 for none), elements."""

    name: str
    tag: int
    n_elements: int


@dataclass(frozen=True)
class FieldNote:
    """A cell field in short.

    Attributes
    ----------
    name : str
    dtype : str
    usable_as_weight : bool
        One finite number >= 0 a cell, not all zero.
    smallest, largest, sum : float or None
        None unless it holds one finite number a cell.
    """

    name: str
    dtype: str
    usable_as_weight: bool
    smallest: float | None
    largest: float | None
    sum: float | None


@dataclass(frozen=True)
class Survey:
    """What a mesh holds and what is wrong with it; figures that cannot be known are None.

    Attributes
    ----------
    n_cells, n_points, dim, space_dim : int
    kinds : mapping of str to int
        Cells of each kind.
    lowest, highest : tuple of float
        Corners of the box around the points that cells list (or the cell centres).
    cells : CellCheck
        Faulty cells, measures, stretch.
    n_inner_faces, n_boundary_faces : int or None
    boundary_measure : float or None
    component_size : tuple of int, or None
        Cells of each connected component, largest first.
    alone : Offenders or None
        Cells that share no face with another.
    cracks : Cracks or None
        Points that coincide and keep cells apart.
    n_unused_points : int
        Points that no cell lists.
    boundary : tuple of GroupNote
    fields : tuple of FieldNote
    split_memory : int
        Bytes a split of this mesh with measuring and writing will need (`split_memory`).
    warnings : tuple of str
        One sentence a fault: what was found and what to do.
    """

    n_cells: int
    n_points: int
    dim: int
    space_dim: int
    kinds: Mapping[str, int]
    lowest: tuple[float, ...]
    highest: tuple[float, ...]
    cells: CellCheck
    n_inner_faces: int | None
    n_boundary_faces: int | None
    boundary_measure: float | None
    component_size: tuple[int, ...] | None
    alone: Offenders | None
    cracks: Cracks | None
    n_unused_points: int
    boundary: tuple[GroupNote, ...]
    fields: tuple[FieldNote, ...]
    split_memory: int
    warnings: tuple[str, ...]

    @property
    def weight_fields(self) -> tuple[str, ...]:
        """Names of the fields that can serve as weights."""
        return tuple(note.name for note in self.fields if note.usable_as_weight)

    def to_json_dict(self) -> dict[str, Any]:
        """Return the survey as plain numbers, texts, lists and dicts with stable keys."""
        plain = asdict(self)
        plain["n_components"] = None if self.component_size is None else len(self.component_size)
        plain["weight_fields"] = list(self.weight_fields)
        plain["kinds"] = dict(self.kinds)
        return plain


def survey_mesh(mesh: Mesh, graph: CellGraph | None, *, tolerance: float | None = None) -> Survey:
    """Look a mesh over.

    Parameters
    ----------
    mesh : Mesh
    graph : CellGraph or None
        Its cell graph; None for meshes of bare centres.
    tolerance : float, optional
        Largest distance of two points that coincide; by default a billionth of the mesh's
        diagonal, at most a tenth of its shortest edge.

    Returns
    -------
    Survey

    Raises
    ------
    MeshError
        If the tolerance is negative or not finite.

    Notes
    -----
    O(n log n) in the number of boundary points, O(edges of cells) otherwise.

    Examples
    --------
    >>> from sfcpart.graph import cell_graph
    >>> points = [[0, 0], [1, 0], [0, 1], [1, 0], [1, 1], [0, 1]]
    >>> mesh = Mesh.from_arrays(
    ...     points, {"triangle": [[0, 1, 2], [3, 4, 5]]}, cell_fields={"cost": [1.0, 2.5]}
    ... )
    >>> survey = survey_mesh(mesh, cell_graph(mesh))
    >>> survey.component_size, survey.cracks.n_faces, survey.weight_fields
    ((1, 1), 1, ('cost',))
    """
    rows = None if graph is None else GraphSlice.whole(graph)
    return survey_slice(MeshSlice.whole(mesh), rows, tolerance=tolerance)


def survey_slice(
    held: MeshSlice, graph: GraphSlice | None, *, tolerance: float | None = None
) -> Survey:
    """Look over a mesh that lies on many ranks (collective).

    Parameters
    ----------
    held, graph : MeshSlice, GraphSlice or None
        What this rank holds of mesh and graph.
    tolerance : float, optional
        As for `survey_mesh`.

    Returns
    -------
    Survey
        The same on every rank, for any number of ranks.

    Raises
    ------
    MeshError
        On all ranks alike, as `survey_mesh`.

    Notes
    -----
    Small reductions, about 80 of them, and what `sfcpart.slices.pieces` and `cracks` send. No
    array of the length of the mesh; components are counted by size.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.slices.graph_slice import graph_slice
    >>> from sfcpart.slices.mesh_slice import cut_mesh
    >>> row = Mesh.from_faces([[0, 1]], [1], [[0, 0], [1, 0], [2, 0]], [1, 1, 1])
    >>> def act(comm):
    ...     held = cut_mesh(row, comm)
    ...     return survey_slice(held, graph_slice(held)).component_size
    >>> run_ranks(2, act)
    [(2, 1), (2, 1)]
    """
    cells, cracks, mesh = check_cells(held), None, held.mesh
    if mesh.points is not None and graph is not None:
        reach = default_tolerance(held, cells.shortest_edge) if tolerance is None else tolerance
        cracks = find_cracks(held, graph.boundary_count, reach)
    low, high = mesh_extent(held)
    alone = None if graph is None else Offenders.of(np.diff(graph.indptr) == 0, held)
    sizes = None if graph is None else _component_sizes(graph)
    fields = tuple(_note_field(name, values, held) for name, values in mesh.cell_fields.items())
    return Survey(
        n_cells=held.n_cells,
        n_points=held.n_points,
        dim=mesh.dim,
        space_dim=mesh.space_dim,
        kinds=count_kinds(held),
        lowest=tuple(low.tolist()),
        highest=tuple(high.tolist()),
        cells=cells,
        **_face_counts(held, graph),
        component_size=sizes,
        alone=alone,
        cracks=cracks,
        n_unused_points=unused_points(held),
        boundary=_group_notes(held),
        fields=fields,
        split_memory=split_memory(held),
        warnings=tuple(_warnings(held.n_cells, cells, alone, sizes, cracks)),
    )


def _face_counts(held: MeshSlice, graph: GraphSlice | None) -> dict[str, Any]:
    """Count faces and measure the boundary."""
    if graph is None:
        return dict.fromkeys(("n_inner_faces", "n_boundary_faces", "boundary_measure"))
    here = np.array([len(graph.indices), graph.boundary_count.sum()], np.int64)
    entries, boundary = held.comm.allreduce(here).tolist()
    size = fixed_sum(graph.boundary_measure, n_values=held.n_cells, comm=held.comm)
    return {
        "n_inner_faces": entries // 2,
        "n_boundary_faces": boundary,
        "boundary_measure": size,
    }


def _group_notes(held: MeshSlice) -> tuple[GroupNote, ...]:
    """Name the boundary groups."""
    sizes = [len(group.kind) for group in held.mesh.boundary]
    if held.groups is not None:
        sizes = [rows.n_elements for rows in held.groups]
    groups = zip(held.mesh.boundary, sizes, strict=True)
    return tuple(GroupNote(group.name, group.tag, size) for group, size in groups)


def _component_sizes(graph: GraphSlice) -> tuple[int, ...]:
    """Count the cells of each component, largest first (collective)."""
    part = np.zeros(graph.n_local + graph.n_ghost, PART)
    _, cells = find_pieces(graph, part).counted(graph)
    size, times = np.unique(cells, return_counts=True)
    met = graph.comm.allgather(np.stack([size, times], axis=1))
    pairs = np.concatenate(met)
    return tuple(np.sort(np.repeat(pairs[:, 0], pairs[:, 1]))[::-1].tolist())


def _note_field(name: str, values: Array, held: MeshSlice) -> FieldNote:
    """Describe a field and see whether it can serve as weights."""
    dtype, comm = str(values.dtype), held.comm
    if values.ndim == 2 and values.shape[1] == 1:
        values = values[:, 0]
    is_number = values.ndim == 1 and values.dtype.kind in "biuf"
    is_finite = np.array([bool(is_number and np.isfinite(values).all())])
    if not comm.allreduce(is_finite, "min")[0]:
        return FieldNote(name, dtype, False, None, None, None)
    column = values.astype(np.float64)
    low, high = (float(end[0]) for end in extent_of(column[:, None], comm))
    total = fixed_sum(column, n_values=held.n_cells, comm=comm)
    return FieldNote(name, dtype, low >= 0 and total > 0, low, high, total)


def _warnings(
    n_cells: int,
    cells: CellCheck,
    alone: Offenders | None,
    sizes: tuple[int, ...] | None,
    cracks: Cracks | None,
) -> list[str]:
    """Say in a sentence each what may be wrong."""
    found = []
    if cells.no_measure.count:
        found.append(_about(cells.no_measure, "no area or volume", "no weight by measure"))
    if cells.collapsed.count:
        found.append(_about(cells.collapsed, "an edge of no length", "faces vanish there"))
    if cells.all_turned:
        kinds = ", ".join(cells.all_turned)
        found.append(f"every {kinds} is inside out: the file orders corners in another way")
    elif cells.inverted.count:
        found.append(_about(cells.inverted, "a negative measure", "inside out"))
    if cracks is not None and cracks.n_faces:
        found.append(
            f"{cracks.n_points} points coincide within {cracks.tolerance:.3g} and keep "
            f"{cracks.n_faces} pairs of faces apart: merge points to close the cracks"
        )
    if alone is not None and n_cells > 1 and alone.count:
        text = _about(alone, "no neighbour", "no face is shared with another cell")
        if alone.count > _MANY_ALONE * n_cells:
            text += "; are points merged, and are these the cells that were written?"
            text += " (some readers turn quadratic cells into broken linear ones)"
        found.append(text)
    if sizes is not None and len(sizes) > 1:
        found.append(
            f"the mesh is in {len(sizes):,} unconnected pieces; the largest has {sizes[0]:,} cells"
        )
    return found


def _about(cells: Offenders, what: str, so: str) -> str:
    """Name the first of some cells."""
    few = ", ".join(map(str, cells.first[:3])) + (", ..." if cells.count > 3 else "")
    plural = "cells have" if cells.count > 1 else "cell has"
    return f"{cells.count:,} {plural} {what} ({few}): {so}"
