"""Methods that rank 0 runs for all."""

from __future__ import annotations

import numpy as np
import pytest

import sfcpart
from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import InputError, PartitionError
from sfcpart.methods.on_one_rank import splits_by_slices
from sfcpart.methods.registry import METHODS
from sfcpart.slices.mesh_slice import cut_mesh
from tests.parted import parted


def test_which_methods_do_with_slices() -> None:
    assert splits_by_slices(METHODS["hilbert"], "balanced")
    assert not splits_by_slices(METHODS["hilbert"], "least")
    assert not splits_by_slices(METHODS["coordinate"], "balanced")


@pytest.mark.parametrize("method", ["coordinate", "multilevel", "spectral"])
def test_the_parts_are_those_of_one_rank(method: str) -> None:
    mesh = parted("tets").mesh
    wish = {"method": method, "weights": "depth", "together": np.arange(mesh.n_cells) // 3}
    wanted = sfcpart.split(mesh, 4, **wish).cell_part

    def split(comm):
        held = cut_mesh(mesh, comm)
        mine = wish["together"][held.cell_gid]
        return sfcpart.split(held, 4, **{**wish, "together": mine}).cell_part

    np.testing.assert_array_equal(np.concatenate(run_ranks(3, split)), wanted)


def test_what_rank_0_refuses_is_refused_by_all() -> None:
    mesh = parted("tets").mesh
    wish = {"method": "coordinate", "limits": 1.0}
    with pytest.raises(PartitionError):
        run_ranks(3, lambda comm: sfcpart.split(cut_mesh(mesh, comm), 2, **wish))


def test_slices_of_unknown_neighbours_have_no_graph() -> None:
    mesh = sfcpart.Mesh.from_arrays([[0, 0], [1, 0], [0, 1]], {"triangle": [[0, 1, 2]]})
    with pytest.raises(InputError, match="not known across ranks"):
        run_ranks(2, lambda comm: sfcpart.split(mesh, 2, method="spectral", comm=comm))
    assert sfcpart.split(mesh, 1, method="spectral", comm=SerialComm()).n_parts == 1
