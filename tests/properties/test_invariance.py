"""A split does not depend on how cells are numbered, where the mesh lies, or its unit of length.

Exactly, bit for bit: translation by dyadic amounts and scaling by powers of two round nothing.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

import sfcpart
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.shapes import lattice
from sfcpart.methods.registry import METHODS
from tests.assertions import assert_partition

ALONG_CURVES = [name for name, method in METHODS.items() if not method.needs_graph]


@st.composite
def box_meshes(draw) -> Mesh:
    """Draw quadrilaterals or hexahedra with dyadic corners that no two cells share a centre of."""
    sides = tuple(draw(st.lists(st.integers(1, 4), min_size=2, max_size=3)))
    assume(np.prod(sides) >= 2)
    mesh = lattice(sides).to_mesh()
    assert mesh.points is not None
    n, dim = mesh.points.shape
    shift = np.random.default_rng(draw(st.integers(0, 999))).integers(-20, 21, (n, dim))
    return with_points(mesh, mesh.points + shift / 64)


def with_points(mesh: Mesh, points: np.ndarray) -> Mesh:
    """Return the same cells on other points."""
    return Mesh.from_cells(
        points, mesh.kind, mesh.indptr, mesh.indices, cell_fields=mesh.cell_fields
    )


def renumbered(mesh: Mesh, order: np.ndarray) -> Mesh:
    """Return the cells in another order."""
    size = np.diff(mesh.indptr)[order]
    rows = [mesh.indices[mesh.indptr[cell] : mesh.indptr[cell + 1]] for cell in order]
    indptr = np.concatenate([[0], np.cumsum(size)])
    return Mesh.from_cells(mesh.points, mesh.kind[order], indptr, np.concatenate(rows))


@st.composite
def jobs(draw):
    """Draw a mesh, a number of parts, whole weights and groups, as `split` takes them."""
    mesh = draw(box_meshes())
    n_parts = draw(st.integers(1, max(1, mesh.n_cells // 2)))
    rng = np.random.default_rng(draw(st.integers(0, 999)))
    wish = {"weights": rng.integers(1, 9, mesh.n_cells)}
    if draw(st.booleans()):
        first = rng.integers(0, mesh.n_cells, 2)
        wish["pairs"] = np.array([first]) if first[0] != first[1] else np.empty((0, 2), int)
    return mesh, n_parts, wish


@pytest.mark.parametrize("method", METHODS)
@given(job=jobs(), shift=st.integers(-(2**20), 2**20), power=st.integers(-40, 40))
def test_place_and_unit_of_length_change_nothing(method, job, shift, power):
    mesh, n_parts, wish = job
    part = sfcpart.split(mesh, n_parts, method=method, **wish).cell_part
    for points in (mesh.points + shift / 64, np.ldexp(mesh.points, power)):
        moved = sfcpart.split(with_points(mesh, points), n_parts, method=method, **wish)
        np.testing.assert_array_equal(moved.cell_part, part)


@pytest.mark.parametrize("method", ALONG_CURVES)
@given(job=jobs(), seed=st.integers(0, 999))
def test_renumbering_the_cells_renumbers_the_parts_along(method, job, seed):
    mesh, n_parts, wish = job
    assume(len(np.unique(mesh.centers, axis=0)) == mesh.n_cells)
    part = sfcpart.split(mesh, n_parts, method=method, **wish).cell_part
    order = np.random.default_rng(seed).permutation(mesh.n_cells)
    place = np.argsort(order)
    wish["weights"] = wish["weights"][order]
    if "pairs" in wish:
        wish["pairs"] = place[wish["pairs"]]
    again = sfcpart.split(renumbered(mesh, order), n_parts, method=method, **wish)
    np.testing.assert_array_equal(again.cell_part, part[order])


@given(job=jobs(), seed=st.integers(0, 999))
def test_each_part_keeps_its_cells_and_its_weight(job, seed):
    mesh, n_parts, wish = job
    partition = sfcpart.split(mesh, n_parts, **wish)
    assert_partition(partition, mesh, n_parts, weights=wish["weights"])
    found = sfcpart.assess(mesh, partition, weights=wish["weights"])
    assert found.part["weight"].sum() == wish["weights"].sum()
    assert found.part["cells"].sum() == mesh.n_cells
