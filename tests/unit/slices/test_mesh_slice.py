"""Slices of a mesh: together they are the mesh, whoever holds what."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import InputError
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.mesh_slice import MeshSlice, cut_mesh, scatter_mesh
from tests.strategies import Case

SIZES = (1, 2, 3, 7)


def uneven(n_cells: int, size: int) -> list[int]:
    """Bounds with an empty rank in front and one rank that holds all the rest."""
    return [0, 0, *[n_cells] * (size - 1)] if size > 1 else [0, n_cells]


def assert_slices(mesh: Mesh, slices: list[MeshSlice]) -> None:
    assert sum(held.n_local for held in slices) == mesh.n_cells
    for name in ("centers", "measures", "kind"):
        joined = np.concatenate([getattr(held.mesh, name) for held in slices])
        np.testing.assert_array_equal(joined, getattr(mesh, name))
    for held in slices:
        assert_slice(mesh, held)


def assert_slice(mesh: Mesh, held: MeshSlice) -> None:
    local, lo, hi = held.mesh, held.first_gid, held.first_gid + held.n_local
    assert (held.n_cells, held.n_points) == (mesh.n_cells, mesh.n_points)
    assert (local.dim, local.space_dim) == (mesh.dim, mesh.space_dim)
    assert held.cell_gid.tolist() == list(range(lo, hi))
    for name, field in mesh.cell_fields.items():
        np.testing.assert_array_equal(local.cell_fields[name], field[lo:hi])
    if mesh.points is None:
        return
    assert held.point_gid is None or np.all(np.diff(held.point_gid) > 0)
    gid = np.arange(mesh.n_points) if held.point_gid is None else held.point_gid
    np.testing.assert_array_equal(local.points, mesh.points[gid])
    wanted = mesh.indices[mesh.indptr[lo] : mesh.indptr[hi]]
    np.testing.assert_array_equal(held.global_points(local.indices), wanted)
    for name, field in mesh.point_fields.items():
        np.testing.assert_array_equal(local.point_fields[name], field[gid])


@pytest.mark.parametrize("size", SIZES)
def test_slices_make_up_the_mesh(size: int, degenerate: Case) -> None:
    mesh = degenerate.mesh.with_cell_field("number", np.arange(degenerate.mesh.n_cells))
    assert_slices(mesh, run_ranks(size, lambda comm: cut_mesh(mesh, comm)))
    bounds = uneven(mesh.n_cells, size)
    cut = run_ranks(size, lambda comm: cut_mesh(mesh, comm, rank_first=bounds))
    assert_slices(mesh, cut)


@pytest.mark.parametrize("size", SIZES)
def test_spreading_from_rank_0_gives_the_same_slices(size: int, degenerate: Case) -> None:
    mesh = degenerate.mesh
    bounds = uneven(mesh.n_cells, size)

    def spread(comm):
        mine = mesh if comm.rank == 0 else None
        return scatter_mesh(mine, comm), scatter_mesh(mine, comm, rank_first=bounds)

    both = run_ranks(size, spread)
    assert_slices(mesh, [even for even, _ in both])
    assert_slices(mesh, [given for _, given in both])


def square() -> Mesh:
    """Two triangles with a boundary all around, a diagonal, and a line that no cell holds."""
    lines = [[0, 1], [1, 2], [0, 2], [1, 3], [2, 3], [3, 0]]
    return Mesh.from_arrays(
        [[0, 0], [1, 0], [1, 1], [0, 1], [9, 9]],
        {"triangle": [[0, 1, 2], [0, 2, 3]], "line": lines},
    )


def test_boundary_elements_lie_with_their_cells() -> None:
    first, second = run_ranks(2, lambda comm: cut_mesh(square(), comm))
    assert first.groups is not None
    assert second.groups is not None
    assert first.groups[0].element_gid.tolist() == [0, 1, 2]
    assert second.groups[0].element_gid.tolist() == [2, 4, 5]
    assert second.groups[0].cell_gid.tolist() == [[0, 1], [1, -1], [1, -1]]
    assert second.groups[0].n_elements == 6
    lines = second.global_points(second.mesh.boundary[0].indices)
    assert lines.tolist() == [0, 2, 2, 3, 3, 0]
    assert second.mesh.boundary[0].name == "line"


def test_faces_lie_with_their_cells_by_global_numbers() -> None:
    bar = Mesh.from_faces([[0, 1], [1, 2], [2, -1]], [1, 2, 3], [[0, 0], [1, 0], [2, 0]], [1] * 3)
    first, second = run_ranks(2, lambda comm: cut_mesh(bar, comm))
    assert first.mesh.faces is not None
    assert second.mesh.faces is not None
    assert first.mesh.faces.cell.tolist() == [[0, 1]]
    assert second.mesh.faces.cell.tolist() == [[0, 1], [1, 2], [2, -1]]
    assert second.mesh.faces.measure.tolist() == [1, 2, 3]


def test_a_whole_mesh_is_a_slice() -> None:
    whole = MeshSlice.whole(square())
    assert whole.point_gid is None
    assert whole.global_points(whole.mesh.indices).tolist() == [0, 1, 2, 0, 2, 3]
    assert whole.with_cell_field("a", [1, 2]).mesh.cell_fields["a"].tolist() == [1, 2]


@pytest.mark.parametrize("bounds", [[0], [0, 1], [1, 2], [0, 2, 1, 2]])
def test_wrong_bounds_are_refused(bounds: list[int]) -> None:
    size = max(1, len(bounds) - 1)
    with pytest.raises(InputError, match="rank_first is"):
        run_ranks(size, lambda comm: cut_mesh(square(), comm, rank_first=bounds))


def test_a_missing_mesh_is_refused_on_all_ranks() -> None:
    with pytest.raises(InputError, match="rank 0 has no mesh"):
        run_ranks(2, lambda comm: scatter_mesh(None, comm))
    with pytest.raises(InputError, match="rank 0 has no mesh"):
        scatter_mesh(None, SerialComm())
