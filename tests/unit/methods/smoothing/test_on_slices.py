"""Smoothing of meshes: over ranks, of any start, with everything that splitting honours."""

from __future__ import annotations

import numpy as np
import pytest

import sfcpart
from sfcpart.comm import run_ranks
from sfcpart.errors import PartitionError
from sfcpart.slices.mesh_slice import cut_mesh
from tests.strategies import grid


def cut_of(mesh, part) -> int:
    graph = sfcpart.cell_graph(mesh)
    row = np.repeat(part, np.diff(graph.indptr))
    return int(np.sum(row != part[graph.indices])) // 2


def pieces_of(mesh, part) -> int:
    from scipy.sparse.csgraph import connected_components

    matrix = sfcpart.cell_graph(mesh).to_scipy().tocoo()
    keep = part[matrix.coords[0]] == part[matrix.coords[1]]
    inside = type(matrix)(
        (matrix.data[keep], (matrix.coords[0][keep], matrix.coords[1][keep])), shape=matrix.shape
    )
    return connected_components(inside, directed=False)[0]


WISHES = {
    "plain": {},
    "weights": {"weights": "work"},
    "speeds": {"speeds": [1.0, 2.0, 1.0, 3.0, 1.0, 1.0]},
    "groups": {"together": "wall"},
    "levels": {"levels": (2, 3)},
    "measure": {"face_weight": "measure"},
    "limits": {"limit_weights": "memory", "limits": 195},
}


def tets() -> sfcpart.Mesh:
    mesh = grid((5, 5, 5), simplices=True)
    n = np.arange(mesh.n_cells)
    fields = {"work": 1 + n % 3, "wall": np.where(n % 7 == 0, n // 70, -1), "memory": 1 + n % 2}
    for name, values in fields.items():
        mesh = mesh.with_cell_field(name, values)
    return mesh


@pytest.mark.parametrize("wish", WISHES)
def test_ranks_split_and_smooth_as_one_process(wish):
    mesh, options = tets(), {"tolerance": 0.1, **WISHES[wish]}
    alone = sfcpart.split(mesh, 6, method="smoothed", **options).cell_part
    start = np.arange(mesh.n_cells) * 6 // mesh.n_cells
    again = sfcpart.smooth(mesh, start, **options).cell_part

    def act(comm):
        held = cut_mesh(mesh, comm)
        mine = slice(held.first_gid, held.first_gid + held.n_local)
        smoothed = sfcpart.split(held, 6, method="smoothed", **options)
        better = sfcpart.smooth(held, start[mine], **options)
        return smoothed.cell_part, better.cell_part

    for size in (2, 5):
        found = run_ranks(size, act)
        np.testing.assert_array_equal(np.concatenate([a for a, _ in found]), alone)
        np.testing.assert_array_equal(np.concatenate([b for _, b in found]), again)


@pytest.mark.parametrize("seed", range(3))
def test_any_start_is_improved_balanced_and_put_in_one_piece(seed):
    mesh = tets()
    n, rng = mesh.n_cells, np.random.default_rng(seed)
    ragged = sfcpart.split(mesh, 5).cell_part.copy()
    loose = rng.choice(n, n // 10, replace=False)
    ragged[loose] = rng.integers(0, 5, len(loose))
    part = sfcpart.smooth(mesh, ragged, tolerance=0.05).cell_part
    assert cut_of(mesh, part) < cut_of(mesh, ragged)
    assert np.bincount(part, minlength=5).max() <= max(1.05 * n / 5, -(-n // 5))
    assert pieces_of(mesh, part) == 5


def test_empty_and_overfull_parts_of_a_start_are_mended():
    mesh = grid((12, 12))
    part = sfcpart.smooth(mesh, np.zeros(mesh.n_cells, int), 4).cell_part
    assert np.bincount(part, minlength=4).max() <= 37
    assert pieces_of(mesh, part) == 4
    start = sfcpart.Partition.from_array(np.zeros(mesh.n_cells, int), 2)
    assert sfcpart.smooth(mesh, start).n_parts == 2


def test_a_perfect_start_comes_back():
    mesh = grid((8, 8))
    start = (np.arange(64) // 8 >= 4).astype(int)
    np.testing.assert_array_equal(sfcpart.smooth(mesh, start, tolerance=0.0).cell_part, start)


def test_a_start_whose_parts_break_limits_is_mended_or_refused():
    mesh = grid((6, 6))
    memory = np.ones(36)
    start = np.repeat([0, 0, 1], 12)
    part = sfcpart.smooth(mesh, start, tolerance=0.5, limit_weights=memory, limits=18).cell_part
    assert np.bincount(part).tolist() == [18, 18]
    with pytest.raises(PartitionError, match="kept neither by the start nor by smoothing"):
        sfcpart.smooth(mesh, start, limit_weights=memory, limits=17)


@pytest.mark.parametrize(
    ("start", "n_parts", "text"),
    [
        ([0, 1, 0], None, "the partition has 3 cells, the mesh 4; wanted one part a cell"),
        ([0, 1, -1, 0], None, "cell 2 is in part -1; parts go from 0 to 1"),
        ([0, 1, 2, 0], 2, "cell 2 is in part 2; parts go from 0 to 1"),
        ([0, 1, 0.5, 0], None, "cell 2 is in part 0.5; wanted whole numbers"),
        ([[0, 1], [1, 0]], None, "wanted one integer a cell"),
    ],
)
def test_bad_starts_are_refused_in_one_line(start, n_parts, text):
    mesh = grid((2, 2))
    with pytest.raises(PartitionError, match=text):
        sfcpart.smooth(mesh, start, n_parts)

    def act(comm):
        held = cut_mesh(mesh, comm)
        own = start if comm.rank == 0 else np.zeros(held.n_local, int)
        with pytest.raises(PartitionError) as caught:
            sfcpart.smooth(held, own, n_parts)
        return str(caught.value)

    if text.startswith("cell"):
        assert len(set(run_ranks(2, lambda comm: act(comm)))) == 1


def test_ranks_without_cells_and_one_that_holds_all():
    mesh = grid((4, 4))
    start = np.arange(16) % 2
    alone = sfcpart.smooth(mesh, start).cell_part

    def act(comm):
        held = cut_mesh(mesh, comm)
        mine = slice(held.first_gid, held.first_gid + held.n_local)
        return sfcpart.smooth(held, start[mine]).cell_part

    np.testing.assert_array_equal(np.concatenate(run_ranks(20, act)), alone)
