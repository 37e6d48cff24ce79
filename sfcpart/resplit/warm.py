"""Load what a way to split again needs before it is timed: compiling is no part of its cost."""

from __future__ import annotations

from dataclasses import replace
from functools import lru_cache

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.dtypes import PART
from sfcpart.errors import SfcpartError
from sfcpart.graph import cell_graph
from sfcpart.mesh.shapes import lattice
from sfcpart.methods.problem import Problem
from sfcpart.resplit.task import Task
from sfcpart.resplit.ways import WAYS

__all__ = ["warm_up"]


@lru_cache(maxsize=64)
def warm_up(way: str, method: str) -> None:
    """Run a way once on a box of a few cells (the first call in a process; then nothing)."""
    mesh = lattice((4, 4, 4)).to_mesh()
    problem = Problem(
        centers=mesh.centers,
        n_parts=4,
        part_speed=np.ones(4),
        comm=SerialComm(),
        graph=lambda: cell_graph(mesh),
        weight=np.arange(1, mesh.n_cells + 1),
    )
    task = Task(problem, np.zeros(mesh.n_cells, PART), 4, method=method)
    try:
        task = replace(task, home_part=WAYS["scratch"].run(replace(task, method="hilbert")))
        WAYS[way].run(task)
    except SfcpartError:
        return  # it will say why where it matters
