"""Methods against exact optima of tiny meshes (scipy.optimize.milp) and closed forms of grids."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import Bounds, LinearConstraint, milp
from scipy.sparse import lil_array

import sfcpart
from sfcpart.graph import cell_graph
from sfcpart.methods.registry import METHODS
from tests.strategies import grid


def cut_faces(mesh, part) -> int:
    graph = cell_graph(mesh)
    row = np.repeat(np.arange(mesh.n_cells), np.diff(graph.indptr))
    return int((part[row] != part[graph.indices]).sum()) // 2


def least_cut(mesh, n_parts: int, most: int) -> int:
    """Return the least number of cut faces with at most `most` cells a part, proved by milp.

    x[v, p] says whether cell v is in part p, y[e] >= |x[a, p] - x[b, p]| whether face e is cut.
    """
    graph, n = cell_graph(mesh), mesh.n_cells
    row = np.repeat(np.arange(n), np.diff(graph.indptr))
    edges = [(a, b) for a, b in zip(row, graph.indices, strict=True) if a < b]
    n_x = n * n_parts
    one = lil_array((n, n_x + len(edges)))
    full = lil_array((n_parts, n_x + len(edges)))
    for v in range(n):
        for p in range(n_parts):
            one[v, v * n_parts + p] = full[p, v * n_parts + p] = 1
    differs = lil_array((2 * len(edges) * n_parts, n_x + len(edges)))
    k = 0
    for e, (a, b) in enumerate(edges):
        for p in range(n_parts):
            for sign in (1, -1):
                differs[k, n_x + e] = 1
                differs[k, a * n_parts + p], differs[k, b * n_parts + p] = sign, -sign
                k += 1
    upper = np.ones(n_x + len(edges))
    upper[1:n_parts] = 0  # cell 0 is in part 0
    found = milp(
        np.concatenate([np.zeros(n_x), np.ones(len(edges))]),
        integrality=np.ones(n_x + len(edges)),
        bounds=Bounds(0, upper),
        constraints=[
            LinearConstraint(one.tocsr(), 1, 1),
            LinearConstraint(full.tocsr(), 1, most),
            LinearConstraint(differs.tocsr(), 0, np.inf),
        ],
    )
    assert found.success
    return round(found.fun)


@pytest.mark.parametrize(
    ("shape", "simplices", "n_parts"),
    [((4, 3), False, 2), ((4, 3), False, 3), ((3, 2, 2), False, 2), ((3, 2), True, 3)],
)
def test_no_method_beats_the_optimum(shape, simplices, n_parts):
    mesh = grid(shape, simplices=simplices)
    for name in METHODS:
        for cuts in ("balanced", "least"):
            part = sfcpart.split(mesh, n_parts, method=name, cuts=cuts, tolerance=0.3).cell_part
            most = int(np.bincount(part).max())
            assert cut_faces(mesh, part) >= least_cut(mesh, n_parts, most), (name, cuts)


def test_the_referee_knows_small_grids():
    # 4 x 4 into 2 and 4 equal parts: straight cuts of 4, and of 8 (squares: N (p^(1/2) - 1) * 2)
    mesh = grid((4, 4))
    assert least_cut(mesh, 2, 8) == 4
    assert least_cut(grid((4, 2)), 2, 4) == 2


@pytest.mark.parametrize("method", ["coordinate", "inertial"])
@pytest.mark.parametrize("side", [16, 32])
@pytest.mark.parametrize("j", [1, 2, 3])
def test_bisection_cuts_grids_into_squares(method, side, j):
    # p = 4^j squares of an N x N grid cut 2 N (2^j - 1) faces, the optimum at perfect balance
    # (elementary; the perimeter bound is Harary, Harborth 1976)
    mesh, p = grid((side, side)), 4**j
    part = sfcpart.split(mesh, p, method=method).cell_part
    assert cut_faces(mesh, part) == 2 * side * (2**j - 1)
    assert (np.bincount(part) == side * side // p).all()


@pytest.mark.parametrize("method", ["coordinate", "inertial"])
def test_bisection_cuts_cubes_into_cubes(method):
    mesh = grid((8, 8, 8))  # 3 N^2 (2^j - 1) faces for p = 8^j, elementary
    for j in (1, 2):
        part = sfcpart.split(mesh, 8**j, method=method).cell_part
        assert cut_faces(mesh, part) == 3 * 64 * (2**j - 1)


@pytest.mark.parametrize("shape", [(24, 10), (31, 6)])
def test_spectral_bisection_cuts_across_the_longer_side(shape):
    # the Fiedler vector of a grid grows along its longer side only (Fiedler 1973, from memory)
    mesh = grid(shape)
    part = sfcpart.split(mesh, 2, method="spectral").cell_part
    x, middle = mesh.centers[:, 0], shape[0] / 2
    left = part[x < middle - 0.75]
    right = part[x > middle + 0.75]
    assert set(left) != set(right)
    assert len(set(left)) == len(set(right)) == 1  # only an odd middle column is divided
    assert shape[0] % 2 or cut_faces(mesh, part) == shape[1]
    assert np.bincount(part).max() == -(-mesh.n_cells // 2)
