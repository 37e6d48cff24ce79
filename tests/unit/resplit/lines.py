"""Tasks whose cells lie on a line, so that the curve order is known."""

from __future__ import annotations

from typing import Any

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.methods.problem import Problem
from sfcpart.resplit.task import Task

__all__ = ["line_task"]


def line_task(home: Any, *, n_parts: int, x: Any = None, comm: Any = None, **wish: Any) -> Task:
    """Return a task with cells at `x` (0, 1, 2, ... by default), each with its home part."""
    home = np.asarray(home, np.int32)
    place = np.arange(len(home)) if x is None else np.asarray(x)
    given = {name: wish.pop(name) for name in ("n_old_parts", "method", "keep") if name in wish}
    problem = Problem(
        centers=place.reshape(-1, 1).astype(float),
        n_parts=n_parts,
        part_speed=np.asarray(wish.pop("speed", np.ones(n_parts)), float),
        comm=SerialComm() if comm is None else comm,
        graph=lambda: None,
        **wish,
    )
    return Task(problem, home, given.pop("n_old_parts", n_parts), **given)
