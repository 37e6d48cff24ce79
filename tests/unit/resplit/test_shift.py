"""Shifted cuts against trying them all."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sfcpart.comm import run_ranks
from sfcpart.errors import InsufficientMemoryError, PartitionError
from sfcpart.resplit import home_line
from sfcpart.resplit import shift as shifting
from sfcpart.resplit.caps import part_caps
from sfcpart.resplit.scratch import scratch
from sfcpart.resplit.shift import shift
from tests.oracles.least_moves import least_moved_weight
from tests.unit.resplit.lines import line_task


class Case(NamedTuple):
    """A line of weighted cells and its old chunks."""

    weight: np.ndarray
    home: np.ndarray
    label: np.ndarray
    speed: np.ndarray
    tolerance: float
    limit_weight: np.ndarray | None
    limit: np.ndarray | None
    edges: list[int]
    order: np.ndarray
    blocks: int

    @property
    def most(self) -> np.ndarray:
        return part_caps(int(self.weight.sum()), self.speed, self.tolerance)

    @property
    def least(self) -> int | None:
        limit = None if self.limit is None else self.limit[self.label].tolist()
        second = None if self.limit_weight is None else self.limit_weight.tolist()
        return least_moved_weight(
            self.weight.tolist(), self.home.tolist(), self.label.tolist(),
            self.most[self.label].tolist(), limit_weight=second, limit=limit,
        )  # fmt: skip


@st.composite
def cases(draw: st.DrawFn) -> Case:
    n_parts = draw(st.integers(1, 5))
    size = draw(st.lists(st.integers(1, 5), min_size=n_parts, max_size=n_parts))
    n = sum(size)
    heaviest = draw(st.sampled_from([1, 3, 10, 100]))
    weight = np.array(draw(st.lists(st.integers(0, heaviest), min_size=n, max_size=n)))
    weight[0] += weight.sum() == 0
    label = np.array(draw(st.permutations(range(n_parts))))
    speeds = st.sampled_from([1.0, 2.0, 3.0])
    speed = np.array(draw(st.lists(speeds, min_size=n_parts, max_size=n_parts)))
    second = limit = None
    if draw(st.booleans()):
        second = np.array(draw(st.lists(st.integers(0, 3), min_size=n, max_size=n)))
        most = max(1, second.max(), round(1.5 * second.sum() / n_parts))
        limit = np.full(n_parts, most)
    n_cuts = draw(st.integers(0, 2))
    edges = draw(st.lists(st.integers(0, n), min_size=n_cuts, max_size=n_cuts))
    return Case(
        weight, np.repeat(label, size), label, speed, draw(st.sampled_from([0.03, 0.3, 1.0])),
        second, limit, [0, *sorted(edges), n], np.array(draw(st.permutations(range(n)))),
        draw(st.sampled_from([1, 2, 100])),
    )  # fmt: skip


def shifted(case: Case) -> np.ndarray:
    """Return the new part of the cells along the line, found by ranks that hold them mixed."""

    def act(comm: Any) -> np.ndarray:
        begin, end = case.edges[comm.rank : comm.rank + 2]
        own = case.order[begin:end]
        limits = {}
        if case.limit is not None and case.limit_weight is not None:
            limits = {"limit_weight": case.limit_weight[own], "part_limit": case.limit}
        return shift(
            line_task(
                case.home[own], n_parts=len(case.label), x=own, comm=comm, speed=case.speed,
                weight=case.weight[own], tolerance=case.tolerance, first_gid=begin, **limits,
            )
        )  # fmt: skip

    found = np.empty(len(case.home), int)
    found[case.order] = np.concatenate(run_ranks(len(case.edges) - 1, act))
    return found


@settings(max_examples=80)
@given(cases())
def test_the_least_weight_moves_that_any_contiguous_split_can_move(case):
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(home_line, "_BLOCKS", case.blocks)  # the line in blocks, or place by place
        patch.setattr(home_line, "_BLOCKS_A_PART", 0)
        try:
            part = shifted(case)
        except PartitionError:
            assert case.limit is not None and case.least is None
            return
    n_parts = len(case.label)
    assert np.array_equal(part[np.flatnonzero(np.diff(part, prepend=-1))], case.label)
    if case.limit is not None:
        second = np.bincount(part, weights=case.limit_weight, minlength=n_parts)
        assert np.all(second <= case.limit)
    if case.least is not None:
        assert np.all(np.bincount(part, weights=case.weight, minlength=n_parts) <= case.most)
        assert case.weight[part != case.home].sum() == case.least


def test_without_weights_every_cell_counts_one():
    assert shift(line_task([0, 0, 0, 0, 1, 1], n_parts=2)).tolist() == [0, 0, 0, 1, 1, 1]


def test_nothing_moves_while_the_tolerance_is_kept():
    home = np.repeat([2, 0, 1], [10, 11, 9])
    assert shift(line_task(home, n_parts=3, tolerance=0.1)).tolist() == home.tolist()


def test_a_cell_too_heavy_for_the_tolerance_has_a_part_for_itself():
    task = line_task([0, 0, 1, 1], n_parts=2, weight=np.array([1, 1, 1, 9]))
    assert shift(task).tolist() == [0, 0, 0, 1]


def test_cells_of_a_group_move_together():
    group = np.array([-1, -1, 5, -1, -1, 5, 7, 7])
    task = line_task([0, 0, 0, 0, 0, 0, 1, 1], n_parts=2, group=group)
    assert shift(task).tolist() == [0, 0, 0, 1, 1, 0, 1, 1]  # 2 and 5 stay, 3 and 4 leave


def test_groups_are_told_apart_by_ranks_as_by_one():
    group = np.array([-1, 3, -1, 3, 9, 9, -1, -1, 4, -1, 4, -1])
    home = np.repeat([0, 1, 2], [6, 3, 3])
    limits = {"part_limit": np.array([6, 6, 6])}
    home[10] = 1

    def act(comm: Any, edges: list[int]) -> np.ndarray:
        own = slice(edges[comm.rank], edges[comm.rank + 1])
        return shift(
            line_task(
                home[own], n_parts=3, x=np.arange(12)[own], comm=comm, first_gid=own.start,
                group=group[own], weight=np.arange(12)[own], limit_weight=np.ones(12, int)[own],
                tolerance=0.2, **limits,
            )
        )  # fmt: skip

    alone = np.concatenate(run_ranks(1, lambda comm: act(comm, [0, 12])))
    spread = np.concatenate(run_ranks(3, lambda comm: act(comm, [0, 2, 2, 12])))
    assert alone.tolist() == spread.tolist()
    assert alone[1] == alone[3] and alone[8] == alone[10]


@pytest.mark.parametrize(("n_old", "n_new"), [(3, 6), (6, 3), (4, 5), (1, 4), (4, 1)])
def test_parts_can_become_more_or_fewer(n_old, n_new):
    rng = np.random.default_rng(n_old)
    weight = rng.integers(1, 9, 60)
    home = np.sort(rng.permutation(np.arange(60) % n_old))
    task = line_task(home, n_parts=n_new, n_old_parts=n_old, weight=weight, tolerance=0.3)
    part = shift(task)
    assert np.all(np.bincount(part, weights=weight, minlength=n_new) <= task.most)
    assert len(np.flatnonzero(np.diff(part))) == n_new - 1
    plain = scratch(task)  # cut anew and renamed
    assert weight[part != home].sum() <= weight[plain != home].sum()


def test_a_part_that_lost_all_its_cells_is_filled_again():
    part = shift(line_task(np.repeat([0, 2], [6, 6]), n_parts=3, tolerance=0.0))
    assert np.bincount(part).tolist() == [4, 4, 4]
    assert np.all(part[:4] == 0) and np.all(part[8:] == 2)


def test_names_of_parts_that_differ_in_speed_are_not_traded():
    home = np.repeat([0, 1], [6, 6])
    task = line_task(home, n_parts=4, n_old_parts=2, speed=[1, 1, 2, 2], tolerance=0.0)
    part = shift(task)
    assert np.bincount(part).tolist() == [2, 2, 4, 4]


def test_a_few_cells_out_of_order_do_not_matter():
    home = np.repeat([0, 1], [40, 60])
    home[39], home[40] = 1, 0
    part = shift(line_task(home, n_parts=2, tolerance=0.0))
    assert np.bincount(part).tolist() == [50, 50]
    assert np.all(part[home == 0] == 0)


def test_old_parts_that_are_no_stretches_are_refused():
    with pytest.raises(PartitionError, match="4 of 8 cells lie outside the stretch of their part"):
        shift(line_task([0, 1, 0, 1, 0, 1, 0, 1], n_parts=2))


def test_groups_must_leave_an_item_for_each_part():
    task = line_task([0, 0, 1, 1], n_parts=2, group=np.zeros(4, np.int64))
    with pytest.raises(PartitionError, match="groups leave 1 items for 2 parts"):
        shift(task)


def test_windows_too_wide_for_the_memory_are_refused(monkeypatch):
    monkeypatch.setattr(shifting, "_MOST_POSITIONS", 2)
    with pytest.raises(InsufficientMemoryError, match="split from scratch"):
        shift(line_task(np.repeat([0, 1], [9, 1]), n_parts=2))


def test_limits_that_no_contiguous_split_keeps_are_refused():
    task = line_task(
        [0, 0, 1], n_parts=2, limit_weight=np.array([3, 3, 3]), part_limit=np.array([4, 4])
    )
    with pytest.raises(PartitionError, match="limits cannot be kept"):
        shift(task)


def test_a_limit_moves_cuts_as_weight_does():
    wish = {"limit_weight": np.ones(8, np.int64), "part_limit": np.array([4, 4])}
    home = np.repeat([0, 1], [6, 2])
    weight = np.array([1, 1, 1, 1, 1, 1, 9, 9])
    task = line_task(home, n_parts=2, weight=weight, tolerance=3.0, **wish)
    assert np.bincount(shift(task)).tolist() == [4, 4]


@pytest.mark.parametrize("blocks", [1, 2, 100])
def test_a_middle_part_too_slow_for_any_cell_gets_the_lightest(blocks, monkeypatch):
    monkeypatch.setattr(home_line, "_BLOCKS", blocks)
    monkeypatch.setattr(home_line, "_BLOCKS_A_PART", 0)
    task = line_task([0, 1, 2], n_parts=3, weight=np.array([40, 40, 1]), speed=[4.0, 1.0, 4.0])
    assert shift(task).tolist() == [0, 1, 2]
    long = line_task(np.repeat([0, 1], [7, 1]), n_parts=2, weight=np.array([9] * 7 + [1]))
    assert np.bincount(shift(long)).tolist() == [4, 4]
