"""Split from scratch with any method, then give the parts the names that move the least."""

from __future__ import annotations

import numpy as np

from sfcpart.dtypes import Int32Array
from sfcpart.methods.on_one_rank import run_method
from sfcpart.methods.registry import METHODS
from sfcpart.resplit.overlap import Overlap
from sfcpart.resplit.relabel import best_labels
from sfcpart.resplit.task import Task

__all__ = ["relabelled", "scratch"]


def scratch(task: Task) -> Int32Array:
    """Return the new part of each local cell, (n_local,) int32.

    Parameters
    ----------
    task : Task

    Raises
    ------
    SfcpartError
        What the method raises.
    """
    return relabelled(task, run_method(METHODS[task.method], task.problem))


def relabelled(task: Task, cell_part: Int32Array) -> Int32Array:
    """Rename the parts of a split so that the least moves."""
    problem = task.problem
    overlap = Overlap.of(
        task.home_part,
        cell_part,
        n_old_parts=task.n_old_parts,
        n_parts=problem.n_parts,
        weight=problem.weight,
        comm=problem.comm,
    )
    label = best_labels(overlap, keep=task.keep, level_sizes=problem.level_sizes, kind=task.kind)
    return np.asarray(label[cell_part])
