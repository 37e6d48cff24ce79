"""Try ways to split again and take the one with the least predicted total time.

The total is that of the steps until the next re-split and of moving. What splitting itself took is
measured, so it stays out of the choice: the same input gives the same answer.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from time import perf_counter
from typing import Any

from sfcpart.dtypes import Int32Array
from sfcpart.errors import PartitionError, SfcpartError
from sfcpart.resplit.migration import Migration
from sfcpart.resplit.task import Task
from sfcpart.resplit.warm import warm_up
from sfcpart.resplit.ways import WAYS

__all__ = ["Trial", "best_trial", "try_ways"]


@dataclass(frozen=True, eq=False)
class Trial:
    """One way to split again and what came of it.

    Attributes
    ----------
    name : str
    cell_part : (n_local,) int32 or None
    migration : Migration or None
    step_seconds : float or None
        Predicted for the new split.
    split_seconds : float
        What splitting took, measured.
    run_seconds : float or None
        Predicted: all steps until the next re-split, and moving.
    failure : str
        Why there is no split; empty if there is one.
    """

    name: str
    cell_part: Int32Array | None = None
    migration: Migration | None = None
    step_seconds: float | None = None
    split_seconds: float = 0.0
    run_seconds: float | None = None
    failure: str = ""

    def to_json_dict(self) -> dict[str, Any]:
        """Return the figures as plain values."""
        moved = self.migration
        return {
            "name": self.name,
            "step_seconds": self.step_seconds,
            "split_seconds": self.split_seconds,
            "move_seconds": None if moved is None else moved.seconds,
            "run_seconds": self.run_seconds,
            "moved_share": None if moved is None else moved.moved_share,
            "times_least": None if moved is None else moved.times_least,
            "failure": self.failure or None,
        }


def try_ways(
    task: Task, names: Sequence[str], step_seconds: Callable[[Int32Array], float]
) -> tuple[Trial, ...]:
    """Run some ways and price what they give; one that refuses becomes a trial that says why.

    Parameters
    ----------
    task : Task
    names : sequence of str
        Of `sfcpart.resplit.ways.WAYS`. A single one that refuses raises its error.
    step_seconds : callable
        Predicts a step from the parts of the cells.
    """
    trials = []
    for name in names:
        try:
            trials.append(_tried(task, name, step_seconds))
        except SfcpartError as error:
            if len(names) < 2:
                raise
            trials.append(Trial(name, failure=str(error)))
    return tuple(trials)


def _tried(task: Task, name: str, step_seconds: Callable[[Int32Array], float]) -> Trial:
    """Run one way."""
    warm_up(name, task.method)
    begin = perf_counter()
    cell_part = WAYS[name].run(task)
    took = perf_counter() - begin
    migration, step = task.migration(cell_part), step_seconds(cell_part)
    run = task.steps * step + migration.seconds
    return Trial(name, cell_part, migration, step, took, run)


def best_trial(trials: Sequence[Trial]) -> Trial:
    """Return the trial with the least predicted time, the first of equal ones.

    Raises
    ------
    PartitionError
        If all refused; it says why each did.
    """
    done = [trial for trial in trials if trial.run_seconds is not None]
    if not done:
        raise PartitionError("; ".join(f"{trial.name}: {trial.failure}" for trial in trials))
    return min(done, key=lambda trial: trial.run_seconds or 0.0)
