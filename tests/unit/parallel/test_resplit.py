"""Cells spread over ranks, split again."""

from __future__ import annotations

import numpy as np
import pytest

import sfcpart
from sfcpart.comm import run_ranks
from sfcpart.errors import InputError, PartitionError
from sfcpart.parallel import resplit_local

CENTERS = np.stack(np.meshgrid(*[np.arange(6.0)] * 3, indexing="ij"), -1).reshape(-1, 3)
WORK = np.where(CENTERS[:, 0] < 3, 0.5, 1.5)


@pytest.mark.parametrize("way", ["shift", "scratch"])
def test_ranks_find_what_one_process_finds(way):
    mesh = sfcpart.Mesh.from_centers(CENTERS)
    old = sfcpart.split(mesh, 5)
    whole = sfcpart.rebalance(mesh, old, weights=WORK, way=way)
    shuffled = np.random.default_rng(0).permutation(len(CENTERS))

    def act(comm):
        gid = np.array_split(shuffled, [50, 50, 130])[comm.rank]
        new = resplit_local(
            CENTERS[gid], old.cell_part[gid], comm=comm, weights=WORK[gid], n_parts=5, way=way,
            cell_gid=gid,
        )  # fmt: skip
        return gid, new

    for gid, new in run_ranks(4, act):
        assert np.array_equal(new.cell_part, whole.partition.cell_part[gid])
        assert new.migration.to_json_dict() == whole.migration.to_json_dict()


def test_cells_are_at_home_on_their_rank_by_default():
    def act(comm):
        own = np.arange(comm.rank * 4, comm.rank * 4 + (4 if comm.rank < 2 else 0))
        new = resplit_local(own[:, None].astype(float), comm=comm, tolerance=0.0)
        return new.cell_part.tolist(), new.migration.n_old_parts

    parts = run_ranks(3, act)
    assert [n for _, n in parts] == [3, 3, 3]
    every = [part for found, _ in parts for part in found]
    assert sorted(every) == [0, 0, 0, 1, 1, 1, 2, 2]


@pytest.mark.parametrize(
    ("wish", "error", "text"),
    [
        ({"way": "smooth"}, InputError, "way is 'smooth'; wanted shift or scratch"),
        ({"keep": "most"}, InputError, "keep is 'most'"),
        ({"method": "multilevel"}, InputError, "needs the cell graph"),
        ({"tolerance": -1}, InputError, "tolerance is -1"),
        ({"home_part": [0, -1]}, PartitionError, "cell 1 is at home in part -1"),
        ({"home_part": [0]}, InputError, r"home_part has shape \(1,\)"),
    ],
)
def test_wishes_that_mean_nothing_are_refused_by_all_ranks(wish, error, text):
    with pytest.raises(error, match=text):
        run_ranks(2, lambda comm: resplit_local(np.zeros((2, 1)), comm=comm, **wish))
