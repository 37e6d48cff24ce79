"""Faces and the cells on both sides against scikit-fem, an independent reference library (PyPI)."""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest

from sfcpart.graph import cell_graph
from sfcpart.mesh.mesh import Mesh
from tests.strategies import grid

skfem = pytest.importorskip("skfem")


def cases():
    """Make one mesh of each kind in scikit-fem; its hexahedra number corners in their own way."""
    axis = [np.linspace(0, 1, n) ** 1.5 for n in (5, 4, 6)]
    hexes = skfem.MeshHex.init_tensor(*axis)
    # corners of scikit-fem's hexahedron in VTK's order, found from the reference coordinates
    reference = skfem.MeshHex().p[:, skfem.MeshHex().t[:, 0]].T
    corners = np.array(
        [(0, 0, 0), (1, 0, 0), (1, 1, 0), (0, 1, 0), (0, 0, 1), (1, 0, 1), (1, 1, 1), (0, 1, 1)]
    )
    order = [int(np.flatnonzero((reference == corner).all(axis=1))[0]) for corner in corners]
    return {
        "triangle": (skfem.MeshTri.init_tensor(*axis[:2]), [0, 1, 2]),
        "quad": (skfem.MeshQuad.init_tensor(*axis[:2]), [0, 1, 2, 3]),
        "tetra": (skfem.MeshTet.init_tensor(*axis), [0, 1, 2, 3]),
        "hexahedron": (hexes, order),
    }


@pytest.mark.parametrize("name", ["triangle", "quad", "tetra", "hexahedron"])
def test_both_cells_of_every_face_are_scikit_fem_s(name):
    reference, order = cases()[name]
    mesh = Mesh.from_arrays(reference.p.T, {name: reference.t[order].T})
    graph = cell_graph(mesh)
    first, second = reference.f2t
    inner = second >= 0
    expected = Counter(
        tuple(sorted(pair))
        for pair in zip(first[inner].tolist(), second[inner].tolist(), strict=True)
    )
    row = np.repeat(np.arange(mesh.n_cells), np.diff(graph.indptr))
    upper = row < graph.indices
    got = Counter(zip(row[upper].tolist(), graph.indices[upper].tolist(), strict=True))
    assert got == expected
    assert graph.n_faces == inner.sum()
    assert graph.boundary_count.sum() == (~inner).sum()
    bare = np.bincount(first[~inner], minlength=mesh.n_cells)
    assert graph.boundary_count.tolist() == bare.tolist()


def test_measures_are_scikit_fem_s():
    reference, order = cases()["hexahedron"]
    mesh = Mesh.from_arrays(reference.p.T, {"hexahedron": reference.t[order].T})
    basis = skfem.CellBasis(reference, skfem.ElementHex1())
    assert mesh.measures == pytest.approx(basis.dx.sum(axis=1), rel=1e-12)


def test_the_grid_of_the_strategies_is_a_tensor_mesh():
    mesh = grid((4, 3), simplices=True)
    assert cell_graph(mesh).n_faces == 4 * 2 + 3 * 3 + 12  # vertical, horizontal, diagonal edges
