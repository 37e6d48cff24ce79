"""Cuts moved along a line: against all splits there are, and what must be kept."""

from __future__ import annotations

from itertools import pairwise, product

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.sparse import csr_array

import sfcpart
from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import InputError
from sfcpart.graph import CellGraph, cell_graph
from sfcpart.methods.curve import window_cuts
from sfcpart.methods.curve.window_cuts import ItemLine, least_cut_positions, line_capacity
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS
from sfcpart.partition import Partition
from tests.assertions import assert_partition
from tests.strategies import grid


@st.composite
def lines(draw):
    """Draw a small weighted graph in line order, strictly increasing cuts and some weights."""
    n = draw(st.integers(2, 11))
    n_parts = draw(st.integers(2, min(n, 4)))
    rng = np.random.default_rng(draw(st.integers(0, 2**32 - 1)))
    width = np.triu(rng.integers(0, 4, (n, n)) * (rng.random((n, n)) < 0.5), 1)
    inner = np.sort(rng.choice(np.arange(1, n), n_parts - 1, replace=False))
    cut = np.concatenate(([0], inner, [n]))
    return csr_array(width + width.T), cut, rng.integers(0, 5, n), rng.integers(0, 3, n)


def cut_weight(matrix: csr_array, part: np.ndarray) -> int:
    """Sum the weights of edges between different parts."""
    dense = matrix.toarray()
    return int(dense[part[:, None] != part].sum()) // 2


def parts_of(cut, item) -> np.ndarray:
    return np.searchsorted(np.asarray(cut)[1:-1], item, side="right")


def arrays(matrix: csr_array) -> dict[str, np.ndarray]:
    return {
        "indptr": matrix.indptr.astype(np.int64),
        "indices": matrix.indices,
        "edge_weight": matrix.data.astype(np.int64),
    }


@given(lines(), st.sampled_from([0.0, 0.2, 1.0]), st.booleans())
def test_least_of_all_contiguous_splits(case, tolerance, limited):
    # Source of the method: Kernighan, J. ACM 18:34 (1971); the referee tries every split.
    matrix, cut, weight, second = case
    n, n_parts = len(weight), len(cut) - 1
    line = ItemLine.of(np.arange(n), weight, second)
    capacity = line_capacity(line, cut, speed=np.ones(n_parts), tolerance=tolerance)
    limit = np.full(n_parts, int(np.diff(line.limit_sums[cut]).max())) if limited else None
    found = least_cut_positions(
        line, cut, capacity=capacity, limit=limit, reach=1e9, **arrays(matrix)
    )
    half = (cut[:-1] + cut[1:]) // 2  # how far a window can reach
    windows = [range(a + 1, b + 1) for a, b in pairwise(half)]
    allowed = [
        (0, *inner, n)
        for inner in product(*windows)
        if (np.diff(line.sums[[0, *inner, n]]) <= capacity).all()
        and (limit is None or (np.diff(line.limit_sums[[0, *inner, n]]) <= limit).all())
    ]
    slack = np.all(capacity > weight.sum() / n_parts)  # else windows may be narrower than that
    best = min(cut_weight(matrix, parts_of(c, np.arange(n))) for c in allowed)
    mine = cut_weight(matrix, parts_of(found, np.arange(n)))
    assert tuple(found.tolist()) in allowed
    assert best <= mine <= cut_weight(matrix, parts_of(cut, np.arange(n)))
    assert mine == best or not slack


def test_an_edge_over_several_cuts_counts_once():
    # 0-7 spans everything; cutting 3-4 (weight 5) must be avoided on either side
    pairs = {(0, 7): 9, (3, 4): 5, (1, 2): 1, (5, 6): 1, (2, 3): 2, (4, 5): 2, (0, 1): 2, (6, 7): 2}
    width = np.zeros((8, 8), np.int64)
    for (a, b), w in pairs.items():
        width[a, b] = width[b, a] = w
    matrix, cut = csr_array(width), np.array([0, 2, 4, 8])
    line = ItemLine.of(np.arange(8))
    found = least_cut_positions(
        line, cut, capacity=np.array([3, 4, 4]), reach=9.0, **arrays(matrix)
    )
    assert found.tolist() == [0, 2, 6, 8]
    assert cut_weight(matrix, parts_of(found, np.arange(8))) == 9 + 1 + 1


def test_equal_cuts_stay_where_they_are():
    matrix = csr_array(np.diag(np.ones(19, int), 1) + np.diag(np.ones(19, int), -1))
    cut = np.array([0, 7, 13, 20])
    line = ItemLine.of(np.arange(20))
    found = least_cut_positions(line, cut, capacity=np.full(3, 12), reach=9.0, **arrays(matrix))
    assert (found == cut).all()


@pytest.mark.parametrize("curve", ["hilbert", "morton", "rows"])
@pytest.mark.parametrize("face_weight", ["count", "measure"])
def test_wishes_are_kept_and_the_cut_never_grows(curve, face_weight):
    mesh = grid((11, 9, 7), simplices=True)
    n, rng, graph = mesh.n_cells, np.random.default_rng(2), cell_graph(mesh)
    weight = rng.integers(1, 9, n)
    group = np.where(rng.random(n) < 0.1, rng.integers(0, 99, n), -1)
    speed = np.array([1.0, 2.0, 1.0, 1.5, 1.0, 3.0])
    wish = {
        "weights": weight, "speeds": speed, "together": group, "levels": (2, 3),
        "limits": np.full(6, n / 2), "method": curve, "face_weight": face_weight,
    }  # fmt: skip
    plain = sfcpart.split(mesh, 6, **wish)
    row = np.repeat(np.arange(n), np.diff(graph.indptr))
    worth = np.ones(len(row)) if face_weight == "count" else graph.data

    def cut(parts):
        part = parts.cell_part
        return worth[part[row] != part[graph.indices]].sum() / 2

    for tolerance in (0.0, 0.03, 0.3):
        moved = sfcpart.split(mesh, 6, cuts="least", tolerance=tolerance, **wish)
        assert_partition(moved, mesh, 6, weights=weight, groups=group)
        assert cut(moved) <= cut(plain) * (1 + 1e-6)
        load = np.bincount(moved.cell_part, weight) / speed
        bottleneck = (np.bincount(plain.cell_part, weight) / speed).max()
        fair = weight.sum() / speed.sum()
        assert load.max() <= max(bottleneck, (1 + tolerance) * fair) * (1 + 1e-12)
    assert cut(moved) < cut(plain)


@pytest.mark.parametrize("budget", [1, 500, 5000])
def test_windows_too_wide_are_tried_in_strides(budget, monkeypatch):
    mesh = grid((16, 14, 5))
    plain = sfcpart.split(mesh, 6)
    exact = sfcpart.split(mesh, 6, cuts="least", tolerance=0.2)
    monkeypatch.setattr(window_cuts, "BUDGET", budget)
    monkeypatch.setattr(window_cuts, "SMALLEST", 3)
    graph = cell_graph(mesh)
    row = np.repeat(np.arange(mesh.n_cells), np.diff(graph.indptr))
    found = sfcpart.split(mesh, 6, cuts="least", tolerance=0.2)
    cut = [
        int((p.cell_part[row] != p.cell_part[graph.indices]).sum()) for p in (exact, found, plain)
    ]
    assert cut[0] <= cut[1] < cut[2]
    assert_partition(found, mesh, 6, bottleneck=1.2 * mesh.n_cells / 6)


def test_chunks_stay_contiguous():
    mesh = grid((16, 16))
    moved = sfcpart.split(mesh, 7, cuts="least", tolerance=0.1)
    along = moved.cell_part[sfcpart.curve_order(mesh.centers)]
    assert (np.diff(along) >= 0).all()


def test_ranks_do_not_matter():
    mesh = grid((8, 7, 6))
    graph, n = cell_graph(mesh), mesh.n_cells

    def problem(comm, low, high):
        return Problem(
            mesh.centers[low:high], 5, np.ones(5), comm, lambda: graph, first_gid=low,
            cuts="least", group=(np.arange(low, high) // 2) % 90,
        )  # fmt: skip

    alone = METHODS["hilbert"].run(problem(SerialComm(), 0, n))
    several = run_ranks(
        3, lambda comm: METHODS["hilbert"].run(
            problem(comm, n * comm.rank // 3, n * (comm.rank + 1) // 3)
        )
    )  # fmt: skip
    assert (np.concatenate(several) == alone).all()


def test_few_cells_and_wrong_wishes():
    mesh = grid((3, 1))
    assert len(np.unique(sfcpart.split(mesh, 3, cuts="least").cell_part)) == 3
    one = sfcpart.split(mesh, 1, cuts="least")
    assert_partition(one, mesh, 1)
    with pytest.raises(InputError, match="cuts is 'best'; wanted one of balanced, least"):
        sfcpart.split(mesh, 2, cuts="best")
    none = np.zeros(0)
    foreign = CellGraph(np.zeros(1, int), none.astype(int), none, none.astype(np.int32), none)
    short = Problem(mesh.centers, 2, np.ones(2), SerialComm(), lambda: foreign, cuts="least")
    with pytest.raises(InputError, match="the cell graph has 0 cells, the problem 3"):
        METHODS["hilbert"].run(short)
    more = Problem(
        mesh.centers, 5, np.ones(5), SerialComm(), lambda: cell_graph(mesh), cuts="least"
    )
    part = Partition.from_array(METHODS["hilbert"].run(more), 5)
    assert len(np.unique(part.cell_part)) == 3
