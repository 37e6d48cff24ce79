"""The Fiedler vector of a graph: the eigenvector of its Laplacian's second smallest eigenvalue.

Coarse to fine: the graph is coarsened by matching (`methods.graph.coarsen`) to at most 48 vertices,
whose eigenvectors are dense (LAPACK). On every finer level the vector is carried over and improved
by locally optimal conjugate gradients (A. V. Knyazev, SIAM J. Sci. Comput. 23:517 (2001), a block
of one vector; from memory) on L x = lambda M x, M counting the vertices merged, with a multigrid
V-cycle over the coarser levels as preconditioner: 6 to 40 steps a level to 10^-2, where a diagonal
one needs hundreds (measured on 1.08e6 random tets: 4.6 s instead of 91 s). Iteration ends when the
residual |L x - lambda M x| falls below `accuracy` lambda, or after `steps` steps.

All sums over vertices are numpy's own and products are scipy.sparse's, both in one thread, since
BLAS and scipy's iterative eigen-solvers add up in an order that depends on the number of threads.
The dense problem is so small that LAPACK works in one thread on it in the builds we know; this is
observed, not promised.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array
from sfcpart.methods.graph.coarsen import Level, WeightedGraph, hierarchy

__all__ = ["fiedler_vector", "spectral_line"]

SMALLEST = 48
"""Vertices that are left to the dense solver: 48^3 operations are below what BLAS threads."""
LARGE = 10_000
"""Vertices from which a bisection is content with a tenth of accuracy (see `spectral_line`)."""
DAMPING = 0.7
OVER = 1.5
"""Of the coarse correction: aggregates without smoothing correct too little (from memory)."""


def fiedler_vector(
    graph: WeightedGraph, *, accuracy: float = 1e-2, steps: int = 200
) -> tuple[float, FloatArray]:
    """Return the second smallest eigenvalue of the Laplacian and its eigenvector.

    Parameters
    ----------
    graph : WeightedGraph
        Connected, two vertices at least. Vertex weights play no role.
    accuracy : float
        Wanted |L x - lambda x| / (lambda |x|).
    steps : int
        The most iterations on one level.

    Returns
    -------
    eigenvalue : float
        Rayleigh quotient of the vector: never below the true one.
    vector : (n,) float64
        Unit length, orthogonal to the constants, its first entry (of half the largest at least)
        negative. Where the eigenvalue is multiple, some vector of its space.

    Notes
    -----
    O(steps * entries). With residual r and a gap g to the third eigenvalue the angle to the true
    vector is about r / g.

    Examples
    --------
    >>> path = WeightedGraph(
    ...     np.array([0, 1, 3, 4]), np.array([1, 0, 2, 1], np.int32), np.ones(4, int), np.ones(3)
    ... )
    >>> eigenvalue, vector = fiedler_vector(path)
    >>> round(eigenvalue, 9), (np.round(vector * 2**0.5, 9) + 0.0).tolist()
    (1.0, [-1.0, 0.0, 1.0])
    """
    levels = _levels(graph)
    coarsest = levels[-1]
    value, vector = _dense(coarsest) if coarsest.n <= SMALLEST else (0.0, _ramp(coarsest.n))
    for depth in range(len(levels) - 1, -1, -1):
        coarse_of = levels[depth].coarse_of
        if coarse_of is not None:
            vector = vector[coarse_of]
        if levels[depth].n > SMALLEST:
            value, vector = _improve(levels[depth:], vector, accuracy, steps)
    vector = vector / np.sqrt((vector * vector).sum())
    large = np.abs(vector) >= np.abs(vector).max() / 2
    return value, vector * -np.sign(vector[np.argmax(large)])


def spectral_line(graph: WeightedGraph, members: Int64Array, share: float) -> Array:
    """Return the values by which to cut some vertices of a graph in two.

    Parameters
    ----------
    graph : WeightedGraph
    members : (m,) int64, ascending
    share : float
        Part of the weight that belongs before the cut.

    Returns
    -------
    (m,) int64
        Components one after another by first vertex; inside the one that holds the cut the rank
        along its Fiedler vector (rounded to 2^-30 of its largest entry), inside others by vertex.

    Notes
    -----
    The vector is known to 10^-4 (see `fiedler_vector`), from 10,000 vertices on to 0.1 only.
    Measured (other 1.08e6 random Delaunay tets than the bench's, 64 parts): the bisection cuts
    76,668 faces at 10^-3, 76,301 at 10^-2, 76,793 at 0.03 and 72,867 at 0.1, so more accuracy
    only costs time (92 s, 39 s on the clock, and 16.5 s of processor time at 0.1).
    """
    inner = _inside(graph, members)
    count, label = _components(inner)
    weight = inner.vertex_weight if inner.vertex_weight.any() else np.ones(inner.n, np.int64)
    before = np.cumsum(np.bincount(label, weight, minlength=count))
    cut = min(int(np.searchsorted(before, share * before[-1], "right")), count - 1)
    place = np.zeros(inner.n, np.int64)
    here = np.flatnonzero(label == cut)
    if len(here) > 1:
        accuracy = 1e-4 if len(here) < LARGE else 0.1
        component = inner if count == 1 else _inside(inner, here)
        _, vector = fiedler_vector(component, accuracy=accuracy)
        place[here] = np.round(vector / np.abs(vector).max() * 2.0**30)
    order = np.lexsort((place, label))
    value = np.empty(inner.n, np.int64)
    value[order] = np.cumsum(
        np.append(0, (np.diff(label[order]) != 0) | (np.diff(place[order]) != 0))
    )
    return value


def _inside(graph: WeightedGraph, members: Int64Array) -> WeightedGraph:
    """Return the graph of some vertices and the edges between them."""
    if len(members) == graph.n:
        return graph
    place = np.full(graph.n, -1, np.int32)
    place[members] = np.arange(len(members), dtype=np.int32)
    degree = np.diff(graph.indptr)[members]
    row = np.repeat(np.arange(len(members)), degree)
    first = np.repeat(graph.indptr[members] - np.cumsum(degree) + degree, degree)
    entry = first + np.arange(len(row))
    keep = place[graph.indices[entry]] >= 0
    inner_count = np.bincount(row[keep], minlength=len(members))
    return WeightedGraph(
        np.concatenate([[0], np.cumsum(inner_count)]).astype(np.int64),
        place[graph.indices[entry[keep]]],
        graph.edge_weight[entry[keep]],
        graph.vertex_weight[members],
    )


def _components(graph: WeightedGraph) -> tuple[int, Int32Array]:
    """Label the components, numbered by their first vertices."""
    from scipy.sparse.csgraph import connected_components

    count, label = connected_components(_adjacency(graph), directed=False)
    _, first = np.unique(label, return_index=True)
    rank = np.empty(count, np.int32)
    rank[np.argsort(first)] = np.arange(count, dtype=np.int32)
    return int(count), rank[label]


def _adjacency(graph: WeightedGraph) -> Any:
    """Return the matrix of edge weights."""
    from scipy.sparse import csr_array

    weight = graph.edge_weight.astype(np.float64)
    return csr_array((weight, graph.indices, graph.indptr), shape=(graph.n, graph.n))


@dataclass(frozen=True, eq=False)
class _Level:
    """A Laplacian, what its vertices stand for, and the vertex each goes to on the next level."""

    adjacency: Any
    degree: FloatArray
    mass: FloatArray
    coarse_of: Int32Array | None
    inverse: FloatArray | None

    @property
    def n(self) -> int:
        """Number of vertices."""
        return len(self.degree)

    def laplacian(self, x: FloatArray) -> FloatArray:
        """Return L x."""
        y: FloatArray = self.degree * x
        y -= self.adjacency @ x
        return y

    def centered(self, x: FloatArray) -> FloatArray:
        """Return x without its M-mean."""
        shifted: FloatArray = x - (self.mass * x).sum() / self.mass.sum()
        return shifted


def _levels(graph: WeightedGraph) -> list[_Level]:
    """Coarsen, two matchings a level; finest first."""
    ones = np.ones(graph.n, np.int64)
    found = hierarchy(
        WeightedGraph(graph.indptr, graph.indices, graph.edge_weight, ones),
        np.zeros(graph.n, np.int32),
        smallest=SMALLEST,
        heaviest=max(2, 3 * graph.n // SMALLEST),
        seed=0,
    )
    last = len(found) - 1
    kept = sorted({*range(0, last, 2), last})
    return [
        _level(found[k].graph, None if k == last else _composed(found[k : min(k + 2, last)]))
        for k in kept
    ]


def _composed(steps: list[Level]) -> Int32Array:
    """Return where the vertices of the first level go after all steps."""
    whole = steps[0].coarse_of
    assert whole is not None
    for step in steps[1:]:
        assert step.coarse_of is not None
        whole = step.coarse_of[whole]
    return whole


def _level(graph: WeightedGraph, coarse_of: Int32Array | None) -> _Level:
    """Turn a graph into floats; invert its Laplacian if it is the coarsest and small."""
    adjacency = _adjacency(graph)
    degree: FloatArray = np.asarray(adjacency.sum(axis=1), np.float64)
    inverse = None
    if coarse_of is None and graph.n <= SMALLEST:
        inverse = np.linalg.pinv(np.diag(degree) - adjacency.toarray(), hermitian=True)
    return _Level(adjacency, degree, graph.vertex_weight.astype(np.float64), coarse_of, inverse)


def _ramp(n: int) -> FloatArray:
    """Start from the place of each vertex where a graph does not let itself be coarsened."""
    return np.arange(n, dtype=np.float64) - (n - 1) / 2


def _dense(level: _Level) -> tuple[float, FloatArray]:
    """Solve L x = lambda M x for a few vertices."""
    root = np.asarray(1.0 / np.sqrt(level.mass), np.float64)
    laplacian = np.diag(level.degree) - level.adjacency.toarray()
    values, vectors = np.linalg.eigh(laplacian * root[:, None] * root)
    return float(values[1]), np.asarray(vectors[:, 1] * root, np.float64)


def _cycle(levels: list[_Level], right: FloatArray) -> FloatArray:
    """Solve L x = right roughly: one V-cycle with damped Jacobi steps before and after."""
    level = levels[0]
    if level.inverse is not None:
        return np.asarray((level.inverse * right).sum(axis=1))
    x = right * (DAMPING / level.degree)
    if level.coarse_of is None:
        return x
    rest = right - level.laplacian(x)
    coarse = np.bincount(level.coarse_of, rest).astype(np.float64, copy=False)
    x += OVER * _cycle(levels[1:], coarse)[level.coarse_of]
    x += (right - level.laplacian(x)) * (DAMPING / level.degree)
    return x


def _improve(
    levels: list[_Level], vector: FloatArray, accuracy: float, steps: int
) -> tuple[float, FloatArray]:
    """Improve an approximate vector of the first level; return Rayleigh quotient and vector."""
    level = levels[0]
    mass = level.mass
    x = level.centered(vector)
    if not x.any():
        x = level.centered(_ramp(level.n))
    x /= np.sqrt((mass * x * x).sum())
    lx = level.laplacian(x)
    moves: list[FloatArray] = []
    value = float((x * lx).sum())
    for step in range(steps):
        residual = lx - value * mass * x
        if (residual * residual / mass).sum() <= (accuracy * value) ** 2:
            break
        vectors = [x, *_independent([_cycle(levels, residual), *moves], x, level)]
        images = [lx, *map(level.laplacian, vectors[1:])]
        mix = _lowest_mix(vectors, images)
        move = _mixed(mix[1:], vectors[1:])
        x, lx = mix[0] * x + move, mix[0] * lx + _mixed(mix[1:], images[1:])
        moves = [move]
        if step % 16 == 15:  # sheds what rounding has added up
            x = level.centered(x)
            x /= np.sqrt((mass * x * x).sum())
            lx = level.laplacian(x)
        value = float((x * lx).sum() / (mass * x * x).sum())
    return value, x


def _independent(vectors: list[FloatArray], x: FloatArray, level: _Level) -> list[FloatArray]:
    """Make vectors M-orthonormal to the constants, x and each other; drop what depends on them."""
    basis = [x]
    for vector in vectors:
        v = level.centered(vector)
        scale = (level.mass * v * v).sum()
        for b in basis:
            v -= (level.mass * b * v).sum() * b
        square = (level.mass * v * v).sum()
        if square > 1e-24 * scale:
            basis.append(v / np.sqrt(square))
    return basis[1:]


def _mixed(mix: FloatArray, vectors: list[FloatArray]) -> FloatArray:
    """Return the linear combination."""
    total = np.zeros(len(vectors[0])) if vectors else np.zeros(1)
    for c, vector in zip(mix, vectors, strict=True):
        total += c * vector
    return total


def _lowest_mix(vectors: list[FloatArray], images: list[FloatArray]) -> FloatArray:
    """Return the mix of orthonormal vectors with the least Rayleigh quotient."""
    k = len(vectors)
    reduced = np.empty((k, k))
    for i in range(k):
        for j in range(i, k):
            reduced[i, j] = reduced[j, i] = (vectors[i] * images[j]).sum()
    mix: FloatArray = np.linalg.eigh(reduced)[1][:, 0]
    return mix if mix[0] >= 0 else -mix
