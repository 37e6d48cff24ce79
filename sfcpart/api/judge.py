"""Measure what is there: the verbs `assess`, `compare` and `inspect`."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, Any

from numpy.typing import ArrayLike

from sfcpart.graph import CellGraph, cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.plan import Weights, part_speeds, plan_problem, weights_of
from sfcpart.slices.graph_slice import GraphSlice, graph_slice
from sfcpart.slices.mesh_slice import MeshSlice

if TYPE_CHECKING:
    from sfcpart.comparison import Comparison
    from sfcpart.measure import Assessment, StepModel
    from sfcpart.measure.survey import Survey
    from sfcpart.meter import Metered
    from sfcpart.methods.problem import Cuts
    from sfcpart.weights import FaceWeight

__all__ = ["assess", "compare", "graph_of", "inspect", "rows_of_graph"]


def assess(
    mesh: Mesh | MeshSlice,
    partition: Partition | ArrayLike,
    *,
    weights: Weights = None,
    speeds: ArrayLike | None = None,
    limit_weights: Weights = None,
    limits: ArrayLike | None = None,
    step_model: StepModel | None = None,
) -> Assessment:
    """Measure a partition, wherever it comes from.

    Parameters
    ----------
    mesh : Mesh or MeshSlice
        With a slice all ranks measure together (`sfcpart.read_slice`).
    partition : Partition or (n_cells,) integers
        Of the cells here; of a slice, a `Partition`, since no rank knows how many parts there are.
    weights, speeds, limit_weights, limits : optional
        As for `split`.
    step_model : StepModel, optional
        What a step costs; a documented default otherwise.

    Returns
    -------
    Assessment
        Balance, cut, halo, pieces, shapes, bounds and predicted step time; see
        `sfcpart.measure.columns` for every figure.

    Raises
    ------
    PartitionError, WeightError
        If the partition or the weights do not belong to the mesh.

    Examples
    --------
    >>> import sfcpart
    >>> points = [[0, 0], [1, 0], [2, 0], [0, 1], [1, 1], [2, 1]]
    >>> mesh = sfcpart.Mesh.from_arrays(points, {"quad": [[0, 1, 4, 3], [1, 2, 5, 4]]})
    >>> sfcpart.assess(mesh, [0, 1]).total["cut_faces"]
    1
    """
    from sfcpart.measure import assess_partition, assess_slice

    partition = _as_partition(partition)
    given: dict[str, Any] = {
        "weights": weights_of(mesh, weights),
        "speeds": None if speeds is None else part_speeds(speeds, partition.n_parts),
        "step_model": step_model,
        "limit_weights": weights_of(mesh, limit_weights),
        "limits": limits,
    }
    if isinstance(mesh, MeshSlice):
        return assess_slice(mesh, rows_of_graph(mesh), partition, **given)
    return assess_partition(mesh, graph_of(mesh), partition, **given)


def compare(
    mesh: Mesh | MeshSlice,
    n_parts: int,
    *,
    methods: Sequence[str] | None = None,
    given: Mapping[str, Partition | ArrayLike] | None = None,
    steps: int = 10_000,
    repeat: int = 1,
    step_model: StepModel | None = None,
    tolerance: float = 0.03,
    cuts: Cuts = "balanced",
    weights: Weights = None,
    speeds: ArrayLike | None = None,
    limit_weights: Weights = None,
    limits: ArrayLike | None = None,
    levels: Sequence[int] | None = None,
    together: ArrayLike | str | Sequence[str] | None = None,
    pairs: ArrayLike | None = None,
    periodic: Sequence[tuple[str, str]] = (),
    face_weight: FaceWeight = "count",
    seed: int = 0,
    progress: Callable[[int], None] = lambda done: None,
) -> Comparison:
    """Split one mesh in several ways and measure all alike.

    Parameters
    ----------
    mesh : Mesh or MeshSlice
        With a slice all ranks work together. Bare centres have no cut to compare; methods that
        need the cell graph refuse them.
    n_parts : int
    methods : sequence of str, optional
        All methods by default.
    given : mapping of str to Partition or (n_cells,) integers, optional
        Partitions from elsewhere into at most as many parts, each one more row.
    steps : int
        Length of the run for which a total time is predicted, the time to split included.
    repeat : int
        How often each split is timed; medians count.
    step_model : StepModel, optional
    tolerance, cuts, weights, speeds, limit_weights, limits, levels, together, pairs, periodic,
    face_weight, seed
        As for `split`, the same for all methods.
    progress : callable
        Called with the number of methods done.

    Returns
    -------
    Comparison
        A method that cannot do what was asked has a row that says why.

    Raises
    ------
    InputError, WeightError, PartitionError
        If a method is unknown, what was asked is malformed, or a given partition does not belong
        to the mesh or has more parts.

    Notes
    -----
    The methods run one after the other, compilation left out; the time to build the cell graph is
    part of the time of each method that needs it.

    Examples
    --------
    >>> import sfcpart
    >>> from sfcpart.mesh.shapes import lattice
    >>> mesh = lattice((8, 8)).to_mesh()
    >>> found = sfcpart.compare(mesh, 4, methods=["hilbert", "rows"])
    >>> [(row["name"], row["cut_faces"]) for row in found.figures()]
    [('hilbert', 16), ('rows', 24)]
    """
    from sfcpart.comparison import compare_methods

    wish: dict[str, Any] = {
        "weights": weights,
        "speeds": speeds,
        "limit_weights": limit_weights,
        "limits": limits,
    }
    problem = plan_problem(
        mesh,
        n_parts,
        tolerance=tolerance,
        cuts=cuts,
        levels=levels,
        together=together,
        pairs=pairs,
        periodic=periodic,
        face_weight=face_weight,
        seed=seed,
        **wish,
    )
    return compare_methods(
        problem,
        methods=methods,
        given={name: _as_partition(parts) for name, parts in (given or {}).items()},
        steps=steps,
        repeat=repeat,
        time_graph=lambda times: _time_graph(mesh, times),
        measure=lambda partition: assess(mesh, partition, step_model=step_model, **wish),
        progress=progress,
    )


def inspect(mesh: Mesh | MeshSlice) -> Survey:
    """Look a mesh over: what it holds and what is wrong with it.

    Parameters
    ----------
    mesh : Mesh or MeshSlice
        With a slice all ranks look together (`sfcpart.read_slice`).

    Returns
    -------
    Survey
        Counts, sizes, pieces, boundary groups, fields, the memory of a split, and warnings; see
        `sfcpart.measure.survey.Survey`.

    Notes
    -----
    O(size of the mesh) and O(n log n) in the number of boundary points.

    Examples
    --------
    >>> import sfcpart
    >>> sfcpart.inspect(sfcpart.Mesh.from_centers([[0.0, 0.0], [1.0, 0.0]])).n_cells
    2
    """
    from sfcpart.measure.survey import survey_mesh, survey_slice

    if isinstance(mesh, MeshSlice):
        return survey_slice(mesh, rows_of_graph(mesh))
    return survey_mesh(mesh, graph_of(mesh))


def _time_graph(mesh: Mesh | MeshSlice, repeat: int) -> Metered | None:
    """Build the cell graph as if for the first time, keep it, and return what it took."""
    from sfcpart.meter import metered

    if isinstance(mesh, MeshSlice):
        if mesh.mesh.points is None and mesh.mesh.faces is None:
            return None
        rows, took = metered(lambda: graph_slice(mesh.anew()), repeat=repeat, comm=mesh.comm)
        mesh.mesh.keep("graph slice", lambda: rows)
        return took
    if mesh.points is None and mesh.faces is None:
        return None
    graph, took = metered(lambda: cell_graph(replace(mesh)), repeat=repeat)
    mesh.keep("graph", lambda: graph)
    return took


def rows_of_graph(held: MeshSlice) -> GraphSlice | None:
    """Return a slice's rows of the cell graph, or None for a mesh known by its centres only."""
    if held.mesh.points is None and held.mesh.faces is None:
        return None
    return graph_slice(held)


def graph_of(mesh: Mesh) -> CellGraph | None:
    """Return the cell graph, or None for a mesh known by its centres only."""
    if mesh.points is None and mesh.faces is None:
        return None
    return cell_graph(mesh)


def _as_partition(parts: Partition | ArrayLike) -> Partition:
    """Return a partition, whether given as one or as an array."""
    return parts if isinstance(parts, Partition) else Partition.from_array(parts)
