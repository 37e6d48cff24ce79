"""What a user asks becomes one `Problem`, alike on all ranks, or one error on all of them."""

from __future__ import annotations

import numpy as np
import pytest

import sfcpart
from sfcpart.comm import run_ranks
from sfcpart.errors import InputError, PartitionError, WeightError

N = 240
RNG = np.random.default_rng(3)
CENTERS = RNG.random((N, 3))
WORK = RNG.random(N)
MEMORY = RNG.random(N) + 0.5
GROUP = np.where(RNG.random(N) < 0.2, RNG.integers(0, 9, N), -1)


def slices(size: int) -> list[slice]:
    """Return uneven slices, none empty: a mesh has a cell at least."""
    share = np.cumsum([0, *range(1, size + 1)]) * N // (size * (size + 1) // 2)
    return [slice(share[rank], share[rank + 1]) for rank in range(size)]


def split_slice(rows: slice, comm, **changes):
    """Split a rank's slice with everything that may be given by the cell."""
    wish = {
        "weights": WORK[rows], "speeds": [1, 1, 2, 1.0], "levels": (2, 2), "together": GROUP[rows],
        "limit_weights": MEMORY[rows], "limits": 0.5 * MEMORY.sum(),
    }  # fmt: skip
    mesh = sfcpart.Mesh.from_centers(CENTERS[rows])
    return sfcpart.split(mesh, 4, comm=comm, **{**wish, **changes}).cell_part


@pytest.mark.parametrize("size", [1, 2, 3, 5])
def test_a_mesh_spread_over_ranks_is_split_as_on_one(size):
    whole = split_slice(slice(0, N), None)
    rows = slices(size)
    pieces = run_ranks(size, lambda comm: split_slice(rows[comm.rank], comm))
    np.testing.assert_array_equal(np.concatenate(pieces), whole)


def _weights(first: int, value: float):
    """Make the weights of a rank, one of them wrong on rank 1 of 3."""

    def change(comm):
        weights = WORK[slices(3)[comm.rank]].copy()
        if comm.rank == 1:
            weights[first] = value
        return weights

    return change


@pytest.mark.parametrize(
    ("name", "change", "error", "words"),
    [
        ("weights", _weights(5, -2.0), WeightError, "cell 45 has weight -2.0"),
        ("limit_weights", _weights(0, np.nan), WeightError, "cell 40 has limited weight nan"),
        ("weights", lambda comm: WORK[: 3 + comm.rank], WeightError, "weights have shape"),
        ("together", lambda comm: "zone" if comm.rank else None, WeightError, "field 'zone'"),
        ("limits", lambda comm: 1.0, PartitionError, "may hold"),
        ("seed", lambda comm: -comm.rank, InputError, "seed is -1"),
    ],
)
def test_an_error_of_one_rank_is_raised_on_all(name, change, error, words):
    def work(comm):
        with pytest.raises(error, match=words) as caught:
            split_slice(slices(3)[comm.rank], comm, **{name: change(comm)})
        return str(caught.value)

    texts = run_ranks(3, work)
    assert texts == [texts[0]] * 3


def test_parts_are_counted_against_the_cells_of_all_ranks():
    def work(comm):
        mesh = sfcpart.Mesh.from_centers(CENTERS[[comm.rank]])
        assert sfcpart.split(mesh, 3, comm=comm).cell_part.shape == (1,)
        with pytest.raises(PartitionError, match="4 parts were asked for, but the mesh has 3"):
            sfcpart.split(mesh, 4, comm=comm)

    run_ranks(3, work)
