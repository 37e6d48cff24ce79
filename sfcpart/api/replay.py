"""Replay a run under rules for re-splitting: the verb `replay`."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.comm import SerialComm
from sfcpart.dtypes import FloatArray, Int32Array
from sfcpart.errors import InputError
from sfcpart.files.series.frame import Frame
from sfcpart.plan import plan_problem, weights_of
from sfcpart.resplit.replayed import DEFAULT_RULES, Replay, check_rules, replay_rules
from sfcpart.resplit.timetable import ResplitCost, frame_speed, make_timetable

if TYPE_CHECKING:
    from sfcpart.measure import StepModel

__all__ = ["replay"]


def replay(
    series: Iterable[Frame],
    n_parts: int,
    *,
    rules: Sequence[str] = DEFAULT_RULES,
    method: str = "hilbert",
    tolerance: float = 0.03,
    weights: str | Sequence[str] | None = None,
    together: str | Sequence[str] | None = None,
    seed: int = 0,
    step_model: StepModel | None = None,
    resplit: ResplitCost | None = None,
    progress: Callable[[int], None] = lambda done: None,
) -> Replay:
    """Replay a run under several rules that say when to re-split, and find the best in hindsight.

    Parameters
    ----------
    series : iterable of Frame
        States of the run in order (`sfcpart.read_series`, or frames of your own): weights on one
        mesh, or meshes with parents. It is gone through once; two meshes are held at a time.
    n_parts : int
    rules : sequence of str
        "never"; "every:N" (frames); "threshold:X" (re-split when the imbalance is above X);
        "stop-at-rise" (when the mean cost of a step since the last re-split rises); "clock" (what
        `sfcpart.RebalanceClock` does); "best-period" (the best N for this run); "hindsight" (the
        best set of frames there is).
    method, tolerance, together, seed
        As for `split`; every frame is split from scratch, parts are renamed to move least.
    weights : str or list of str, optional
        Specifications of weights, as for `split`, on top of the weights of the frames.
    step_model : StepModel, optional
        What a step costs; the mean cell of the first frame takes its `cell_seconds`.
    resplit : ResplitCost, optional
        What a re-split costs beside moving cells.
    progress : callable
        Called with the number of frames done.

    Returns
    -------
    Replay
        For each rule: predicted time of the run, number of re-splits, bytes moved, imbalance of
        every frame, and the regret against hindsight.

    Raises
    ------
    InputError, WeightError, PartitionError
        If a rule or method is unknown, the series is empty, or a frame does not follow from the
        one before.

    Notes
    -----
    Rules decide between frames, from what was measured up to then; a re-split knows what the
    coming frame weighs. O(f^2) passes over the cells for f frames. Times are those of a simple
    model (`sfcpart.measure.step_model`): they rank rules, they do not replace a measurement.

    Examples
    --------
    >>> import sfcpart
    >>> mesh = sfcpart.Mesh.from_centers([[float(x), 0.0] for x in range(8)])
    >>> hot = [[9.0 if k <= x < k + 4 else 1.0 for x in range(8)] for k in range(4)]
    >>> found = sfcpart.replay(
    ...     [sfcpart.Frame(mesh, weight=weight, steps=100) for weight in hot], 2,
    ...     rules=["never", "every:1"])
    >>> [(row["rule"], row["n_resplits"]) for row in found.figures()]
    [('never', 0), ('every:1', 3)]
    """
    from sfcpart.measure import StepModel
    from sfcpart.methods.registry import METHODS

    if method not in METHODS:
        raise InputError(f"method {method!r} is unknown; wanted one of {', '.join(METHODS)}")

    def weigh(frame: Frame) -> FloatArray:
        return _weight(frame, weights)

    def split(frame: Frame, weight: FloatArray) -> Int32Array:
        problem = plan_problem(
            frame.mesh,
            n_parts,
            tolerance=tolerance,
            weights=weight,
            speeds=frame_speed(frame, n_parts),
            limit_weights=None,
            limits=None,
            levels=None,
            together=together,
            pairs=None,
            periodic=(),
            face_weight="count",
            seed=seed,
            comm=SerialComm(),
        )
        return METHODS[method].run(problem)

    check_rules(rules)
    table = make_timetable(
        series,
        n_parts,
        split=split,
        weigh=weigh,
        model=StepModel() if step_model is None else step_model,
        resplit=ResplitCost() if resplit is None else resplit,
        progress=progress,
    )
    return replay_rules(table, rules)


def _weight(frame: Frame, weights: str | Sequence[str] | None) -> FloatArray:
    """Return the weight of each cell of a frame: its own times what is specified."""
    weight: ArrayLike | None = frame.weight
    more = weights_of(frame.mesh, weights)
    own = np.ones(frame.n_cells) if weight is None else np.asarray(weight, np.float64)
    return own if more is None else own * np.asarray(more, np.float64)
