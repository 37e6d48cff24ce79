"""Divide a mesh again when the work has moved: the verb `rebalance`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.api.judge import assess, graph_of
from sfcpart.dtypes import Int32Array
from sfcpart.errors import InputError
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.plan import Weights, plan_problem

if TYPE_CHECKING:
    from sfcpart.halo import Across
    from sfcpart.measure import Assessment, StepModel
    from sfcpart.methods.problem import Cuts
    from sfcpart.resplit.relabel import Keep
    from sfcpart.resplit.result import Rebalance
    from sfcpart.resplit.task import Task
    from sfcpart.weights import FaceWeight

__all__ = ["rebalance", "write_rebalance"]


def rebalance(
    mesh: Mesh,
    old: Partition | ArrayLike,
    *,
    n_parts: int | None = None,
    way: str = "auto",
    method: str = "hilbert",
    keep: Keep = "total",
    steps: int = 1000,
    cell_bytes: float = 200.0,
    step_model: StepModel | None = None,
    parent: ArrayLike | str | None = None,
    merged_into: ArrayLike | None = None,
    old_mesh: Mesh | None = None,
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
) -> Rebalance:
    """Divide a mesh again so that little moves, and tell whether it pays.

    Parameters
    ----------
    mesh : Mesh
        The mesh as it is now.
    old : Partition or (n_old,) integers
        The split in use, of this mesh or of the old one.
    n_parts : int, optional
        As many as before by default; growing and shrinking work.
    way : str
        "auto" tries several and takes the least predicted time of the steps to come and of
        moving; or one of `sfcpart.resplit.ways.WAYS`: "shift" (the cuts along the curve),
        "smooth" (the old borders, with a price on moving), "scratch" (any method, renamed).
    method : str
        What splits from scratch, and whose curve cuts are shifted along.
    keep : {"total", "busiest"}
        What new names of parts keep small: all that moves, or what the busiest part moves.
    steps : int
        Steps of the solver until the split is looked at again.
    cell_bytes : float
        Bytes that a moving cell takes along.
    step_model : StepModel, optional
        What a step and a message cost; a documented default otherwise.
    parent : (n_cells,) integers, or the name of a cell field, optional
        Old cell that each cell is, or is a child of; -1 where that is not known.
    merged_into : (n_old,) integers, optional
        Cell that each old cell became a piece of; -1 for the others.
    old_mesh : Mesh, optional
        For cells that neither tells about: they come from the old cell with the nearest centre.
    tolerance, cuts, weights, speeds, limit_weights, limits, levels, together, pairs, periodic,
    face_weight, seed
        As for `split`. `together="parent"` keeps families in one part.

    Returns
    -------
    Rebalance

    Raises
    ------
    InputError, WeightError, PartitionError
        If something asked for is malformed or cannot be met; the message says what could.

    Notes
    -----
    Shifting takes O(n) time beside the curve order, which is kept on the mesh. Predictions rank
    splits, they do not replace a measurement; see `sfcpart manual rebalance`.

    Examples
    --------
    >>> import numpy as np
    >>> import sfcpart
    >>> from sfcpart.mesh.shapes import lattice
    >>> mesh = lattice((8, 8)).to_mesh()
    >>> old = sfcpart.split(mesh, 4)
    >>> work = np.where(mesh.centers[:, 0] < 4, 1.0, 3.0)
    >>> new = sfcpart.rebalance(mesh, old, weights=work, way="shift")
    >>> new.migration.moved_cells, round(new.migration.times_least, 2)
    (28, 1.93)
    >>> new.verdict.step_after < new.verdict.step_before
    True
    """
    from sfcpart.measure import StepModel
    from sfcpart.methods.registry import METHODS
    from sfcpart.resplit.task import Task

    if method not in METHODS:
        raise InputError(f"method {method!r} is unknown; wanted one of {', '.join(METHODS)}")
    if keep not in ("total", "busiest"):
        raise InputError(f"keep is {keep!r}; wanted total or busiest")
    names = _ways(way, mesh, method)
    old = old if isinstance(old, Partition) else Partition.from_array(old)
    home = _home(mesh, old, parent, merged_into, old_mesh)
    load: dict[str, Any] = {
        "weights": weights,
        "speeds": speeds,
        "limit_weights": limit_weights,
        "limits": limits,
    }
    problem = plan_problem(
        mesh,
        old.n_parts if n_parts is None else n_parts,
        tolerance=tolerance,
        cuts=cuts,
        levels=levels,
        together=together,
        pairs=pairs,
        periodic=periodic,
        face_weight=face_weight,
        seed=seed,
        **load,
    )
    task = Task(
        problem=problem,
        home_part=home,
        n_old_parts=old.n_parts,
        method=method,
        keep=keep,
        steps=_steps(steps),
        cell_bytes=cell_bytes,
        step_model=StepModel() if step_model is None else step_model,
    )
    return _judged(mesh, task, names, load)


def write_rebalance(
    folder: str | PathLike[str],
    mesh: Mesh,
    result: Rebalance,
    *,
    formats: Sequence[str] = ("vtkhdf",),
    layers: int = 1,
    across: Across = "faces",
    overwrite: bool = False,
    picture: bool = False,
    report: bool = False,
    compress: bool = False,
    title: str | None = None,
    source: str | PathLike[str] | None = None,
    options: Mapping[str, Any] | None = None,
) -> Path:
    """Write the new parts as `write_split` does, with `migration.h5` and the verdict beside them.

    Parameters
    ----------
    folder : path
        The folder to make; it appears complete or not at all.
    mesh : Mesh
    result : Rebalance
    formats, layers, across, overwrite, picture, report, compress, title, source, options
        As for `write_split`.

    Returns
    -------
    pathlib.Path
        The folder.

    Raises
    ------
    InputError, FileError
        As `write_split`.

    Notes
    -----
    As `write_split`; the lists of moving cells take a sort of these.

    Examples
    --------
    >>> import tempfile
    >>> import sfcpart
    >>> from sfcpart.mesh.shapes import lattice
    >>> mesh = lattice((4, 4)).to_mesh()
    >>> result = sfcpart.rebalance(mesh, sfcpart.split(mesh, 2), n_parts=4, way="shift")
    >>> with tempfile.TemporaryDirectory() as place:
    ...     folder = sfcpart.write_rebalance(f"{place}/parts", mesh, result)
    ...     sfcpart.read_moves(folder, 0).send_gid.tolist()
    [8, 9, 12, 13]
    """
    from sfcpart.deliver import Delivery, deliver
    from sfcpart.files.parts.moves import write_moves
    from sfcpart.report.page.rebalance import rebalance_page

    def more(place: Path) -> dict[str, Any]:
        write_moves(
            place / "migration.h5",
            result.home.cell_part,
            result.partition.cell_part,
            n_old_parts=result.home.n_parts,
            n_parts=result.partition.n_parts,
            cell_bytes=result.migration.cell_bytes,
        )
        return {"rebalance": result.to_json_dict()}

    return deliver(
        folder,
        mesh,
        result.partition,
        assessment=result.after,
        graph=graph_of(mesh),
        how=Delivery(tuple(formats), layers, across, overwrite, picture, compress, title, report),
        source=None if source is None else Path(source),
        options={} if options is None else options,
        more=more,
        page=lambda page: rebalance_page(page, result),
    )


def _ways(way: str, mesh: Mesh, method: str) -> list[str]:
    """Return the ways to try."""
    from sfcpart.resplit.ways import AUTO, WAYS

    if way != AUTO and way not in WAYS:
        raise InputError(f"way {way!r} is unknown; wanted one of {AUTO}, {', '.join(WAYS)}")
    if way != AUTO:
        return [way]
    has_faces = mesh.points is not None or mesh.faces is not None
    return [name for name, each in WAYS.items() if has_faces or not each.needs_graph]


def _steps(steps: int) -> int:
    """Return a whole number of steps."""
    if isinstance(steps, bool) or not isinstance(steps, int | np.integer) or steps < 1:
        raise InputError(f"steps is {steps!r}; wanted a whole number, 1 or more")
    return int(steps)


def _home(
    mesh: Mesh,
    old: Partition,
    parent: ArrayLike | str | None,
    merged_into: ArrayLike | None,
    old_mesh: Mesh | None,
) -> Int32Array:
    """Return the part that holds each cell now."""
    from sfcpart.resplit.origin import home_parts

    if isinstance(parent, str):
        if parent not in mesh.cell_fields:
            known = ", ".join(sorted(mesh.cell_fields)) or "none"
            raise InputError(f"there is no cell field {parent!r}; the mesh has {known}")
        parent = mesh.cell_fields[parent]
    return home_parts(
        old,
        mesh.n_cells,
        parent=parent,
        merged_into=merged_into,
        old_centers=None if old_mesh is None else old_mesh.centers,
        centers=mesh.centers,
    )


def _judged(mesh: Mesh, task: Task, names: Sequence[str], load: dict[str, Any]) -> Rebalance:
    """Run the ways, take the best, and weigh it against keeping the old split."""
    from sfcpart.resplit.choose import best_trial, try_ways
    from sfcpart.resplit.result import Rebalance
    from sfcpart.resplit.verdict import Verdict

    n_parts, model = task.problem.n_parts, task.step_model
    found: dict[int, Assessment] = {}

    def step_seconds(cell_part: Int32Array) -> float:
        partition = Partition.from_array(cell_part, n_parts)
        found[id(cell_part)] = assess(mesh, partition, step_model=model, **load)
        return _step(found[id(cell_part)])

    trials = try_ways(task, names, step_seconds)
    best = best_trial(trials)
    assert best.cell_part is not None and best.migration is not None
    home = Partition.from_array(task.home_part, task.n_old_parts)
    before = None
    if task.n_old_parts == n_parts:
        before = assess(mesh, home, step_model=model, **load)
    stays = before is not None and (before.total["limit_share"] or 0.0) <= 1.0
    return Rebalance(
        partition=Partition.from_array(best.cell_part, n_parts),
        home=home,
        way=best.name,
        migration=best.migration,
        verdict=Verdict.of(
            _step(before) if stays and before is not None else None,
            best.step_seconds,
            split_seconds=best.split_seconds,
            move_seconds=best.migration.seconds,
            steps=task.steps,
        ),
        before=before,
        after=found[id(best.cell_part)],
        trials=trials,
    )


def _step(assessment: Assessment) -> float:
    """Return the predicted seconds of a step; of its work alone where there are no faces."""
    step = assessment.total["step_seconds"]
    if step is not None:
        return float(step)
    total = assessment.total
    fair = assessment.step_model.cell_seconds * float(total["n_cells"] or 0) / assessment.n_parts
    return fair * (1.0 + float(total["imbalance"] or 0.0))
