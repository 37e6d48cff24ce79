"""The public verbs: check, plan, call, wrap.

mesh = sfcpart.read_mesh("channel.vtu")
partition = sfcpart.split(mesh, 64)
assessment = sfcpart.assess(mesh, partition)
sfcpart.write_split("parts", mesh, partition)
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

from numpy.typing import ArrayLike

from sfcpart.comm import SerialComm
from sfcpart.curve import curve_keys, curve_order
from sfcpart.errors import InputError
from sfcpart.files.meshes.cell_values import read_cell_values
from sfcpart.files.meshes.read import read_mesh
from sfcpart.files.parts.part import Part, read_part
from sfcpart.graph import CellGraph, cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.plan import Weights, part_speeds, plan_problem, weights_of

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm
    from sfcpart.comparison import Comparison
    from sfcpart.halo import Across
    from sfcpart.measure import Assessment, StepModel
    from sfcpart.measure.survey import Survey
    from sfcpart.meter import Metered
    from sfcpart.methods.problem import Cuts
    from sfcpart.weights import FaceWeight

__all__ = [
    "Mesh",
    "Part",
    "Partition",
    "assess",
    "cell_graph",
    "compare",
    "curve_keys",
    "curve_order",
    "inspect",
    "read_cell_values",
    "read_mesh",
    "read_part",
    "split",
    "write_split",
]


def split(
    mesh: Mesh,
    n_parts: int,
    *,
    method: str = "hilbert",
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
    comm: Comm | None = None,
) -> Partition:
    """Divide a mesh into parts of equal work.

    Parameters
    ----------
    mesh : Mesh
    n_parts : int
        Number of parts, 1 <= n_parts <= n_cells. No part is empty.
    method : str
        A name of `sfcpart.methods.registry.METHODS`.
    tolerance : float
        How far the heaviest part may exceed its fair share (0.03: 3 %) where a method can trade
        balance for a smaller cut.
    cuts : {"balanced", "least"}
        How methods along a curve choose their cuts: with the least heaviest part there is, or,
        within `tolerance`, with few faces cut (which takes the cell graph). Others ignore it.
    weights : (n_cells,) numbers, or str, or list of str, optional
        Work of each cell: numbers >= 0, or specifications (see `sfcpart.weights`), multiplied.
        1 each by default.
    speeds : (n_parts,) numbers, optional
        Relative speed of each part's rank, > 0.
    limit_weights, limits : optional
        A second weight of each cell (as `weights`; 1 each by default) and the most of it that a
        part may hold, one number or one a part: memory, for instance.
    levels : sequence of int, optional
        Nested levels such as (4, 16): nodes, then cores; their product is `n_parts`.
    together : (n_cells,) numbers, or names of cell fields, optional
        Cells with equal values stay in one part; negative numbers and NaN are free.
    pairs : (m, 2) integers, optional
        Cells that stay together two by two.
    periodic : sequence of (str, str)
        Pairs of boundary groups whose facing cells stay together.
    face_weight : {"count", "measure"}
        What methods on the cell graph keep small: the number of cut faces, or their total measure.
    seed : int
        The only source of randomness of the methods that use any.
    comm : Comm, optional
        Ranks that each hold a slice of the cells as `mesh` (and of whatever has a row a cell),
        for methods along a curve; this process alone by default. `pairs`, `periodic` and texts as
        groups need the whole mesh.

    Returns
    -------
    Partition
        Of this rank's cells; the same for any number of threads and ranks.

    Raises
    ------
    InputError, WeightError, PartitionError
        If something asked for is malformed or cannot be met; the message says what could.

    Notes
    -----
    Curve methods: O(n) plus one sort of the keys. A partition changes the order in which a solver
    sums; it says nothing about whether a simulation is right.

    Examples
    --------
    >>> import sfcpart
    >>> mesh = sfcpart.Mesh.from_centers([[x, y] for x in range(4) for y in range(4)])
    >>> sfcpart.split(mesh, 4).part_size().tolist()
    [4, 4, 4, 4]
    """
    from sfcpart.methods.registry import METHODS

    if method not in METHODS:
        raise InputError(f"method {method!r} is unknown; wanted one of {', '.join(METHODS)}")
    problem = plan_problem(
        mesh,
        n_parts,
        tolerance=tolerance,
        cuts=cuts,
        weights=weights,
        speeds=speeds,
        limit_weights=limit_weights,
        limits=limits,
        levels=levels,
        together=together,
        pairs=pairs,
        periodic=periodic,
        face_weight=face_weight,
        seed=seed,
        comm=comm or SerialComm(),
    )
    return Partition.from_array(METHODS[method].run(problem), problem.n_parts)


def assess(
    mesh: Mesh,
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
    mesh : Mesh
    partition : Partition or (n_cells,) integers
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
    from sfcpart.measure import assess_partition

    partition = _as_partition(partition)
    return assess_partition(
        mesh,
        graph_of(mesh),
        partition,
        weights=weights_of(mesh, weights),
        speeds=None if speeds is None else part_speeds(speeds, partition.n_parts),
        step_model=step_model,
        limit_weights=weights_of(mesh, limit_weights),
        limits=limits,
    )


def compare(
    mesh: Mesh,
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
) -> Comparison:
    """Split one mesh in several ways and measure all alike.

    Parameters
    ----------
    mesh : Mesh
        Bare centres have no cut to compare; methods that need the cell graph refuse them.
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

    wish = {"weights": weights, "speeds": speeds, "limit_weights": limit_weights, "limits": limits}
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
        comm=SerialComm(),
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
    )


def inspect(mesh: Mesh) -> Survey:
    """Look a mesh over: what it holds and what is wrong with it.

    Parameters
    ----------
    mesh : Mesh

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
    from sfcpart.measure.survey import survey_mesh

    return survey_mesh(mesh, graph_of(mesh))


def write_split(
    folder: str | PathLike[str],
    mesh: Mesh,
    partition: Partition,
    *,
    assessment: Assessment | None = None,
    formats: Sequence[str] = ("vtkhdf",),
    layers: int = 1,
    across: Across = "faces",
    overwrite: bool = False,
    picture: bool = False,
    compress: bool = False,
    title: str | None = None,
    source: str | PathLike[str] | None = None,
    options: Mapping[str, Any] | None = None,
) -> Path:
    """Write the parts and their figures into a folder that appears complete or not at all.

    Parameters
    ----------
    folder : path
        The folder to make; refused if it holds something, unless `overwrite` and all of it was
        written by sfcpart.
    mesh : Mesh
    partition : Partition
    assessment : Assessment, optional
        Figures to write; measured with defaults if missing.
    formats : sequence of {"vtkhdf", "vtu", "same"}
        One VTKHDF file with ghost cells and exchange lists; VTU pieces with a PVTU; or the
        input's own format with a `part` field (needs `source`): `parts` with the input's
        extension, but `mesh.vtkhdf` for VTKHDF.
    layers, across : int, {"faces", "points"}
        Depth of the halo, and what it grows across.
    overwrite, picture, compress : bool
        Whether to replace an earlier result, to draw `parts.png`, to pack the VTKHDF file.
    title : str, optional
        First line of the picture; by default the name of `source`, or the number of parts.
    source : path, optional
        The mesh file; its digest goes into `summary.json`.
    options : mapping, optional
        What the split was asked for, for `summary.json`.

    Returns
    -------
    pathlib.Path
        The folder.

    Raises
    ------
    InputError
        If a format is unknown, or `source` is missing where it is needed.
    FileError
        If the folder is refused or cannot be written; nothing is left behind then.

    Notes
    -----
    O(n_cells + halo) time; memory for blocks of about a million cells.

    Examples
    --------
    >>> import tempfile
    >>> import sfcpart
    >>> from sfcpart.mesh.shapes import lattice
    >>> mesh = lattice((4, 4)).to_mesh()
    >>> with tempfile.TemporaryDirectory() as place:
    ...     folder = sfcpart.write_split(f"{place}/parts", mesh, sfcpart.split(mesh, 2))
    ...     sfcpart.read_part(folder, 1).n_owned
    8
    """
    from sfcpart.deliver import Delivery, deliver

    return deliver(
        folder,
        mesh,
        partition,
        assessment=assess(mesh, partition) if assessment is None else assessment,
        graph=graph_of(mesh),
        how=Delivery(tuple(formats), layers, across, overwrite, picture, compress, title),
        source=None if source is None else Path(source),
        options={} if options is None else options,
    )


def _time_graph(mesh: Mesh, repeat: int) -> Metered | None:
    """Build the cell graph as if for the first time, keep it, and return what it took."""
    if mesh.points is None and mesh.faces is None:
        return None
    from sfcpart.meter import metered

    graph, took = metered(lambda: cell_graph(replace(mesh)), repeat=repeat)
    mesh.keep("graph", lambda: graph)
    return took


def graph_of(mesh: Mesh) -> CellGraph | None:
    """Return the cell graph, or None for a mesh known by its centres only."""
    if mesh.points is None and mesh.faces is None:
        return None
    return cell_graph(mesh)


def _as_partition(parts: Partition | ArrayLike) -> Partition:
    """Return a partition, whether given as one or as an array."""
    return parts if isinstance(parts, Partition) else Partition.from_array(parts)
