"""A mesh brought to rank 0 is the mesh that was cut."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.comm import run_ranks
from sfcpart.graph import cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.gathering import gather_mesh
from sfcpart.slices.mesh_slice import MeshSlice, cut_mesh
from tests.parted import SAMPLES, parted


@pytest.mark.parametrize("name", SAMPLES)
def test_what_was_cut_comes_back(name: str) -> None:
    mesh = parted(name, n_parts=1).mesh
    whole, *others = run_ranks(3, lambda comm: gather_mesh(cut_mesh(mesh, comm)))
    assert others == [None, None]
    assert whole is not None
    assert (whole.dim, whole.space_dim) == (mesh.dim, mesh.space_dim)
    for field in ("kind", "centers", "measures"):
        np.testing.assert_array_equal(getattr(whole, field), getattr(mesh, field))
    np.testing.assert_array_equal(whole.cell_fields["depth"], mesh.cell_fields["depth"])
    if mesh.points is not None or mesh.faces is not None:
        one, other = cell_graph(whole), cell_graph(mesh)
        np.testing.assert_array_equal(one.indices, other.indices)
        np.testing.assert_array_equal(one.data, other.data)


def test_points_that_no_cell_uses_are_left_out() -> None:
    points = [[9, 9], [0, 0], [1, 0], [0, 1], [8, 8], [1, 1]]
    mesh = Mesh.from_arrays(points, {"triangle": [[1, 2, 3], [2, 5, 3]]})
    whole = run_ranks(2, lambda comm: gather_mesh(cut_mesh(mesh, comm)))[0]
    assert whole.points.tolist() == [[0, 0], [1, 0], [0, 1], [1, 1]]
    assert whole.indices.tolist() == [0, 1, 2, 1, 3, 2]


def test_a_whole_mesh_is_not_copied() -> None:
    mesh = parted("tets").mesh
    assert gather_mesh(MeshSlice.whole(mesh)) is mesh
