"""What a way to split again is given: one frozen value."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from sfcpart.dtypes import Int32Array, Int64Array
from sfcpart.measure.step_model import StepModel
from sfcpart.methods.problem import Problem
from sfcpart.resplit.caps import part_caps
from sfcpart.resplit.migration import CELL_BYTES, Migration
from sfcpart.resplit.relabel import Keep

__all__ = ["Task"]


@dataclass(frozen=True, eq=False)
class Task:
    """A mesh to divide again (arrays are this rank's slice of the cells).

    Attributes
    ----------
    problem : Problem
        The new mesh with its new weights, and everything else that a split is asked for.
    home_part : (n_local,) int32
        Old part that holds each cell, 0 <= part < n_old_parts.
    n_old_parts : int
    method : str
        What splits from scratch, and which curve cuts are shifted along if it is one.
    keep : {"total", "busiest"}
        What a relabelling keeps small; see `sfcpart.resplit.relabel`.
    steps : int
        Steps of the solver until the next split.
    cell_bytes : float
        Bytes that a moving cell takes along.
    step_model : StepModel
        Prices moving, and exchanging in each step.
    """

    problem: Problem
    home_part: Int32Array
    n_old_parts: int
    method: str = "hilbert"
    keep: Keep = "total"
    steps: int = 1000
    cell_bytes: float = CELL_BYTES
    step_model: StepModel = field(default_factory=StepModel)
    _kept: dict[str, int] = field(default_factory=dict, init=False, repr=False)

    @property
    def total(self) -> int:
        """Quantised weight of all cells of all ranks; collective at first."""
        problem = self.problem
        if "total" not in self._kept:
            weight = problem.weight
            own = len(problem.centers) if weight is None else int(weight.sum())
            total = problem.comm.allreduce(np.array([own], np.int64))
            self._kept["total"] = int(total[0])
        return self._kept["total"]

    @property
    def is_limited(self) -> bool:
        """Whether there is a second weight to keep."""
        return self.problem.limit_weight is not None and self.problem.part_limit is not None

    @property
    def most(self) -> Int64Array:
        """The most each part may weigh, (n_parts,) int64."""
        return part_caps(self.total, self.problem.part_speed, self.problem.tolerance)

    @property
    def kind(self) -> Int64Array:
        """Number of the speed and limit of each part: parts of one number may trade names."""
        problem = self.problem
        limit = problem.part_limit
        rows = [problem.part_speed] if limit is None else [problem.part_speed, limit]
        _, number = np.unique(np.stack(rows, axis=1), axis=0, return_inverse=True)
        return number.reshape(-1).astype(np.int64)

    def migration(self, cell_part: Int32Array) -> Migration:
        """Return what a new split moves."""
        return Migration.of(
            self.home_part,
            cell_part,
            n_old_parts=self.n_old_parts,
            n_parts=self.problem.n_parts,
            most=self.most,
            weight=self.problem.weight,
            unit=self.problem.weight_unit,
            cell_bytes=self.cell_bytes,
            network=self.step_model.network,
            comm=self.problem.comm,
        )
