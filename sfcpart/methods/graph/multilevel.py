"""Divide any graph: multilevel partition of a symmetric sparse matrix, no coordinates needed.

Measured, with default options: N x N grids at perfect balance, N = 32, 64, 128, p = 4, 16, 64: the
optimum; 32^3 in 8 parts: the optimum; octahedral sphere n = 64 at 3 %, 2 to 64 parts: 384, 766,
1152, 1754, 2551, 3657 in 1.7 to 8.5 s of one shared core; two parts at perfect balance 386. 1.08e6
random tets, 64 parts (`tools/bench/graph_methods.py`): 0.575 to 0.584 of the Hilbert cut, 0.579
with seed 0, in 4.3 s of processor time; 546,750 tets: 4096 parts cost 3.1 times as much as 16.
29,478 tets in 64 parts as a mesh: 4.4 s. Doubling cells costs less than twice the time.
"""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import Int32Array
from sfcpart.errors import InputError
from sfcpart.methods.graph.any_graph import graph_of_matrix, in_walk_order
from sfcpart.methods.graph.search import best_of_many
from sfcpart.methods.graph.vcycle import Aim

if TYPE_CHECKING:
    from numpy.typing import ArrayLike

__all__ = ["split_graph"]

THOROUGH = 4
"""Graphs get this many times the runs that cell graphs get."""


def split_graph(
    adjacency: Any,
    n_parts: int,
    *,
    tolerance: float = 0.03,
    vertex_weight: ArrayLike | None = None,
    seed: int = 0,
    starts: int = 1,
) -> Int32Array:
    """Divide the vertices of a graph into parts of equal weight with few edges between them.

    Parameters
    ----------
    adjacency : (n, n) sparse matrix or array of scipy, or CellGraph
        Symmetric. Values are edge weights >= 0: integers as they are, others quantised to 20
        bits; explicit zeros and the diagonal are ignored.
    n_parts : int
        1 <= n_parts.
    tolerance : float
        No part weighs more than (1 + tolerance) times the mean weight rounded up, where vertex
        weights allow it; 0 is honoured for unit weights.
    vertex_weight : (n,) integers >= 0, optional
        1 each by default.
    seed : int
    starts : int
        Multiplies the effort: more tries, crossed with each other. Small graphs get several
        anyway.

    Returns
    -------
    (n,) int32
        Part of each vertex. A part is empty only if there are fewer vertices than parts. The same
        for any number of threads.

    Raises
    ------
    InputError
        If the matrix is not square and symmetric, or an option is out of range.
    WeightError
        If vertex or edge weights are negative or no numbers.

    Notes
    -----
    O(entries) for bounded degrees.

    Examples
    --------
    >>> from scipy.sparse import diags_array
    >>> path = diags_array([1, 1], offsets=[-1, 1], shape=(6, 6), dtype=int)
    >>> part = split_graph(path, 2, tolerance=0.0)
    >>> sorted([part[:3].tolist(), part[3:].tolist()])
    [[0, 0, 0], [1, 1, 1]]
    """
    graph = graph_of_matrix(adjacency, vertex_weight)
    if isinstance(n_parts, bool) or not isinstance(n_parts, int | np.integer) or n_parts < 1:
        raise InputError(f"n_parts is {n_parts!r}; wanted a whole number, at least 1")
    if not (np.isfinite(tolerance) and tolerance >= 0):
        raise InputError(f"tolerance is {tolerance!r}; wanted a number >= 0, such as 0.03")
    if isinstance(starts, bool) or not isinstance(starts, int | np.integer) or starts < 1:
        raise InputError(f"starts is {starts!r}; wanted a whole number, at least 1")
    if isinstance(seed, bool) or not isinstance(seed, int | np.integer) or seed < 0:
        raise InputError(f"seed is {seed!r}; wanted a whole number >= 0")
    walked, place = in_walk_order(graph)
    total = int(graph.vertex_weight.sum())
    aim = Aim.of(total, np.ones(int(n_parts)), float(tolerance), int(seed) % (1 << 31))
    return best_of_many(walked, aim, starts=THOROUGH * int(starts))[place]
