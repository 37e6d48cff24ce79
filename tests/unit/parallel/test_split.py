"""Splitting cells that any rank may hold, as one process would split them all."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import sfcpart
from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import InputError, PartitionError, WeightError
from sfcpart.parallel import split_local
from tests.assertions import assert_partition
from tests.strategies import dyadic_clouds


@st.composite
def spread_clouds(draw):
    """Draw centres (some coincide), weights and who holds them (some ranks hold nothing)."""
    centers = draw(dyadic_clouds(min_size=1, max_size=40))
    size = draw(st.integers(1, 4))
    owner = np.array(draw(st.lists(st.integers(0, size - 1), min_size=len(centers),
                                   max_size=len(centers))))  # fmt: skip
    weights = np.array(draw(st.lists(st.integers(0, 9), min_size=len(centers),
                                     max_size=len(centers)))) + 0.5  # fmt: skip
    return centers, weights, owner, size


@given(spread_clouds(), st.integers(1, 6), st.sampled_from(["hilbert", "morton", "rows"]))
def test_with_numbers_the_answer_is_that_of_one_process(cloud, n_parts, method):
    centers, weights, owner, size = cloud
    n_parts = min(n_parts, len(centers))

    def act(comm):
        mine = np.random.default_rng(comm.rank).permutation(np.flatnonzero(owner == comm.rank))
        part = split_local(
            centers[mine],
            comm=comm,
            n_parts=n_parts,
            weights=weights[mine],
            cell_gid=3 * mine + 7,
            method=method,
        )
        return mine, part

    cell_part = np.full(len(centers), -1, np.int32)
    for mine, part in run_ranks(size, act):
        assert part.dtype == np.int32
        cell_part[mine] = part
    mesh = sfcpart.Mesh.from_centers(centers)
    wanted = sfcpart.split(mesh, n_parts, weights=weights, method=method)
    assert cell_part.tolist() == wanted.cell_part.tolist()


@given(spread_clouds())
def test_without_numbers_ranks_hold_consecutive_slices(cloud):
    centers, weights, owner, size = cloud
    owner = np.sort(owner)

    def act(comm):
        mine = owner == comm.rank
        return split_local(centers[mine], comm=comm, weights=weights[mine])

    cell_part = np.concatenate(run_ranks(size, act))
    if len(centers) >= size:  # one part a rank by default
        partition = sfcpart.split(sfcpart.Mesh.from_centers(centers), size, weights=weights)
        assert cell_part.tolist() == partition.cell_part.tolist()
        assert_partition(partition, len(centers), size, weights=weights)


def test_speeds_levels_limits_and_groups_are_kept():
    n = 600
    rng = np.random.default_rng(3)
    size = rng.random(n)
    centers, group = rng.random((n, 3)), np.where(rng.random(n) < 0.1, rng.integers(0, 9, n), -1)
    wish = {"speeds": [1, 1, 2, 4], "levels": [2, 2], "limits": [20.0, 200, 200, 250]}

    def act(comm):
        mine = slice(comm.rank, n, comm.size)
        return split_local(
            centers[mine],
            comm=comm,
            n_parts=4,
            together=group[mine],
            limit_weights=size[mine],
            cell_gid=np.arange(n)[mine],
            **wish,
        )

    cell_part = np.empty(n, np.int32)
    for rank, part in enumerate(run_ranks(3, act)):
        cell_part[rank::3] = part
    mesh = sfcpart.Mesh.from_centers(centers)
    wanted = sfcpart.split(mesh, 4, together=group, limit_weights=size, **wish)
    assert cell_part.tolist() == wanted.cell_part.tolist()
    assert np.argmax(np.bincount(cell_part)) == 3  # the fast part has the most
    assert np.bincount(cell_part, size)[0] <= 20.0 < size.sum() / 8  # less than its fair share


def test_no_rank_needs_cells():
    def act(comm):
        return split_local(np.zeros((0, 3)), comm=comm, weights=[]).tolist()

    assert run_ranks(2, act) == [[], []]


@pytest.mark.parametrize(
    ("changes", "error", "message"),
    [
        ({"centers": np.zeros(3)}, InputError, r"centers has shape \(3,\)"),
        ({"centers": np.zeros((2, 3))}, InputError, "rank 1 and rank 0 ask for different splits"),
        ({"centers": [[0, np.nan]] * 2}, InputError, "centre 2 has nan on axis 1"),
        ({"n_parts": 0}, InputError, "n_parts is 0"),
        ({"n_parts": 3}, InputError, "3 parts, .* wanted the same options on all ranks"),
        ({"weights": [1.0]}, WeightError, r"weights has shape \(1,\)"),
        ({"weights": [1.0, -2.0]}, WeightError, "cell 3 has weight -2.0"),
        ({"weights": None}, InputError, "different splits"),
        ({"together": [1, 2]}, InputError, "different splits"),
        ({"limits": 3}, InputError, "different splits"),
        ({"limits": [1, 2, 3]}, WeightError, r"limits has shape \(3,\)"),
        ({"limit_weights": [1, 2]}, WeightError, "limit_weights without limits"),
        ({"speeds": [1, 2]}, InputError, "different splits"),
        ({"method": "multilevel"}, InputError, "different splits"),
        ({"cell_gid": [0, 1]}, InputError, "ranks 0 and 1 both own cell 0"),
        ({"cell_gid": [2]}, WeightError, r"cell_gid has shape \(1,\)"),
        ({"cell_gid": [2, 2]}, InputError, "rows 0 and 1 are both cell 2"),
    ],
)
def test_an_error_of_one_rank_is_an_error_of_all(changes, error, message):
    def act(comm):
        given = {"centers": np.eye(2), "weights": [1.0, 2.0], "n_parts": 2}
        given["cell_gid"] = 2 * comm.rank + np.arange(2)
        if comm.rank == 1:
            given |= changes
        with pytest.raises(error, match=message):
            split_local(given.pop("centers"), comm=comm, **given)

    run_ranks(2, act)


def test_what_no_rank_can_have_is_refused():
    with pytest.raises(InputError, match="method 'multilevel' is unknown or needs the cell graph"):
        split_local(np.eye(3), comm=SerialComm(), method="multilevel")
    with pytest.raises(PartitionError, match="levels 2x2 do not multiply to 3"):
        split_local(np.eye(3), comm=SerialComm(), n_parts=3, levels=[2, 2])
    with pytest.raises(WeightError, match="2 speeds for 3 parts"):
        split_local(np.eye(3), comm=SerialComm(), n_parts=3, speeds=[1, 2])
    with pytest.raises(PartitionError, match="limit"):
        split_local(np.eye(3), comm=SerialComm(), n_parts=2, limits=1)
    with pytest.raises(WeightError, match="all 3 weights are zero"):
        split_local(np.eye(3), comm=SerialComm(), weights=np.zeros(3))
    with pytest.raises(InputError, match="comm is None; wanted a communicator of mpi4py"):
        split_local(np.eye(3), comm=None)
