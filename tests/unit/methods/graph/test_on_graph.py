"""The graph methods on meshes: what every way to split owes, and pieces."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.sparse.csgraph import connected_components

import sfcpart
from sfcpart.errors import PartitionError
from tests.strategies import grid

METHODS = ["smoothed", "multilevel"]


def cut_of(graph, part) -> int:
    row = np.repeat(part, np.diff(graph.indptr))
    return int(np.sum(row != part[graph.indices])) // 2


def pieces(graph, part) -> int:
    matrix = graph.to_scipy().tocoo()
    row, column = matrix.coords
    keep = part[row] == part[column]
    inside = type(matrix)((matrix.data[keep], (row[keep], column[keep])), shape=matrix.shape)
    return connected_components(inside, directed=False)[0]


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize("n_parts", [2, 5])
def test_less_cut_in_one_piece_within_the_tolerance(method, n_parts):
    mesh = grid((4, 4, 4), simplices=True)
    graph = sfcpart.cell_graph(mesh)
    start = sfcpart.split(mesh, n_parts).cell_part
    part = sfcpart.split(mesh, n_parts, method=method, tolerance=0.05).cell_part
    assert cut_of(graph, part) <= cut_of(graph, start)
    size = np.bincount(part, minlength=n_parts)
    assert size.max() <= max(1.05 * mesh.n_cells / n_parts, -(-mesh.n_cells // n_parts))
    assert pieces(graph, part) == n_parts


@pytest.mark.parametrize("method", METHODS)
def test_speeds_groups_and_limits_are_honoured(method):
    mesh = grid((12, 12))
    n = mesh.n_cells
    group = np.where(np.arange(n) % 5 == 0, np.arange(n) // 20, -1)
    speeds = [1.0, 2.0, 3.0]
    part = sfcpart.split(mesh, 3, method=method, speeds=speeds, together=group).cell_part
    size = np.bincount(part, minlength=3)
    assert np.all(np.abs(size - n * np.array(speeds) / 6) <= 6)
    for g in np.unique(group[group >= 0]):
        assert len(np.unique(part[group == g])) == 1
    memory = np.where(np.arange(n) < n // 4, 5, 1)
    part = sfcpart.split(mesh, 4, method=method, limit_weights=memory, limits=80).cell_part
    assert np.bincount(part, weights=memory, minlength=4).max() <= 80
    with pytest.raises(PartitionError):
        sfcpart.split(mesh, 4, method=method, limit_weights=memory, limits=60)


@pytest.mark.parametrize("method", METHODS)
def test_nested_levels_balance_each_level(method):
    mesh = grid((12, 12))
    part = sfcpart.split(mesh, 6, method=method, levels=(2, 3), tolerance=0.1).cell_part
    assert np.bincount(part // 3).max() <= 1.1 * 72 + 1
    assert len(np.unique(part)) == 6


def test_large_faces_are_not_cut_where_small_ones_can_be():
    # Columns 1 wide and 10 tall: by count a cut across them is as good as one along them.
    x, y = np.meshgrid(np.arange(9.0), np.arange(9.0) * 10, indexing="ij")
    points = np.stack([x.ravel(), y.ravel()], 1)
    corner = (np.arange(8)[:, None] * 9 + np.arange(8)).ravel()
    mesh = sfcpart.Mesh.from_arrays(
        points, {"quad": np.stack([corner, corner + 9, corner + 10, corner + 1], 1)}
    )
    part = sfcpart.split(mesh, 2, method="multilevel", face_weight="measure").cell_part
    graph = sfcpart.cell_graph(mesh)
    row = np.repeat(part, np.diff(graph.indptr))
    assert graph.data[row != part[graph.indices]].sum() / 2 == 8.0


def test_layers_are_cut_no_more_than_by_bisection():
    # Eight layers, each twice as thick as the one below: face measures differ by a factor of 10^3.
    x, z = np.meshgrid(np.arange(17.0), 2.0 ** np.arange(9) / 256, indexing="ij")
    corner = (np.arange(16)[:, None] * 9 + np.arange(8)).ravel()
    mesh = sfcpart.Mesh.from_arrays(
        np.stack([x.ravel(), z.ravel()], 1),
        {"quad": np.stack([corner, corner + 9, corner + 10, corner + 1], 1)},
    )
    graph = sfcpart.cell_graph(mesh)

    def measure_cut(method, **wish):
        part = sfcpart.split(mesh, 4, method=method, **wish).cell_part
        row = np.repeat(part, np.diff(graph.indptr))
        return graph.data[row != part[graph.indices]].sum() / 2

    deep = measure_cut("multilevel", face_weight="measure")
    assert deep <= measure_cut("coordinate") * (1 + 1e-4)  # faces keep 20 bits of the largest
