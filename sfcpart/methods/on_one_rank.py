"""Methods that cannot run on slices of the cells: rank 0 splits for all.

Rank 0 gathers what the method looks at (centres, weights, groups, the cell graph if it asks for
it) and hands the parts out. That is a limit: the problem must fit its memory. Cost: what the method
costs on one rank, while the others wait.
"""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.dtypes import OFFSET, PART, Int32Array, Int64Array, index_dtype
from sfcpart.errors import SfcpartError
from sfcpart.graph import CellGraph
from sfcpart.methods.problem import Cuts, Problem
from sfcpart.slices.graph_slice import GraphSlice
from sfcpart.slices.routing import gather_rows, hand_out_rows

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm
    from sfcpart.methods.registry import Method

__all__ = ["run_method", "splits_by_slices"]


def splits_by_slices(method: Method, cuts: Cuts) -> bool:
    """Tell whether a method does with the slices that the ranks hold.

    Parameters
    ----------
    method : Method
    cuts : {"balanced", "least"}

    Examples
    --------
    >>> from sfcpart.methods.registry import METHODS
    >>> splits_by_slices(METHODS["hilbert"], "balanced")
    True
    """
    moves_cuts = cuts == "least" and method.home.startswith("curve.")
    return method.by_slices and not moves_cuts


def run_method(method: Method, problem: Problem) -> Int32Array:
    """Return the part of each local cell: by all ranks if the method can, else by rank 0.

    Parameters
    ----------
    method : Method
    problem : Problem

    Returns
    -------
    (n_local,) int32

    Raises
    ------
    SfcpartError
        What the method raises, on all ranks.
    """
    if splits_by_slices(method, problem.cuts):
        return method.run(problem)
    whole = _gathered(problem, needs_graph=method.uses_graph(problem))
    error, part = None, np.empty(0, PART)
    try:
        if problem.comm.rank == 0:
            part = method.run(whole)
    except (SfcpartError, MemoryError) as caught:
        error = caught
    problem.comm.check(error)
    return hand_out_rows(problem.comm, part, n_local=len(problem.centers))


def _gathered(problem: Problem, *, needs_graph: bool) -> Problem:
    """Return the problem of all cells on rank 0; the others get one without cells."""
    comm = problem.comm

    def all_of(values: Int64Array | None) -> Int64Array | None:
        return None if values is None else gather_rows(comm, values)

    graph = _gathered_graph(problem.graph(), comm) if needs_graph else None
    return replace(
        problem,
        centers=gather_rows(comm, problem.centers),
        first_gid=0,
        weight=all_of(problem.weight),
        limit_weight=all_of(problem.limit_weight),
        group=all_of(problem.group),
        graph=problem.graph if graph is None else lambda: graph,
        comm=SerialComm(),
    )


def _gathered_graph(graph: CellGraph | GraphSlice, comm: Comm) -> CellGraph:
    """Bring the rows of the cell graph to rank 0, with neighbours by their global numbers."""
    if isinstance(graph, CellGraph):
        return graph
    size = gather_rows(comm, np.diff(graph.indptr))
    numbers = graph.gid_of(graph.indices).astype(index_dtype(graph.n_cells), copy=False)
    rows = [gather_rows(comm, array) for array in (numbers, graph.data)]
    boundary = [gather_rows(comm, a) for a in (graph.boundary_count, graph.boundary_measure)]
    indptr = np.concatenate(([0], np.cumsum(size))).astype(OFFSET)
    return CellGraph(indptr, rows[0], rows[1], *boundary)
