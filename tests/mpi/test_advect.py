"""The solver in tools/: the same bits on any ranks, dye that stays, a mesh without gaps."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from tests.mpi.harness import run_script

SCRIPT = Path(__file__).resolve().parents[2] / "tools" / "solver" / "advect.py"
CASES = {
    2: ["--shape", "6", "3", "--levels", "3", "--steps", "16", "--every", "4"],
    3: ["--dim", "3", "--shape", "4", "2", "2", "--levels", "2", "--steps", "8", "--every", "4"],
}
POLICY = {1: ["--policy", "clock"], 2: ["--policy", "tolerance", "--tolerance", "0.002"]}
"""Splits of their own choice: by measured times on one rank, by the balance of work on more."""


def run(folder: Path, dim: int, size: int) -> tuple[dict, dict]:
    """Run a case; return what it told, and the cells of all ranks by number."""
    folder.mkdir()
    policy = POLICY[min(size, 2)]
    printed = run_script(SCRIPT, size, *CASES[dim], *policy, "--json", "--save", str(folder))
    ranks = [dict(np.load(folder / f"rank{r}.npz")) for r in range(size)]
    near = [np.split(rank["near_gid"], rank["near_indptr"][1:-1]) for rank in ranks]
    names = ("gid", "level", "born", "dye", "bound")
    cells = {name: np.concatenate([rank[name] for rank in ranks]) for name in names}
    order = np.argsort(cells["gid"])
    cells = {name: column[order] for name, column in cells.items()}
    whole = [rows for rank in near for rows in rank]
    cells["near"] = [whole[k].tolist() for k in order]
    return json.loads(printed), cells


@pytest.fixture(scope="module", params=[2, 3])
def alone(request, tmp_path_factory):
    """Run each case on one rank."""
    return request.param, *run(tmp_path_factory.mktemp("alone") / "cells", request.param, 1)


@pytest.mark.parametrize("size", [2, 3])
def test_the_same_bits_on_any_ranks(tmp_path, alone, size):
    dim, told, cells = alone
    told_by_ranks, cells_of_ranks = run(tmp_path / "cells", dim, size)
    assert cells_of_ranks["near"] == cells["near"]
    for name in ("gid", "level", "born", "dye", "bound"):
        assert cells_of_ranks[name].tobytes() == cells[name].tobytes(), name
    assert told_by_ranks["checksum"] == told["checksum"]
    assert told_by_ranks["splits"] > 1  # it did split again on the way
    assert told_by_ranks["cells_moved"] > 0
    assert told_by_ranks["imbalance_left"] < 0.25  # few cells


def test_dye_is_conserved_and_flows(alone):
    _, told, cells = alone
    assert told["dye_after"] == pytest.approx(told["dye_before"], rel=1e-13)
    assert (cells["dye"] >= 0).all()
    assert 0 < cells["bound"].max() < cells["dye"].max()
    assert {"halo", "split", "migration"} - set(told["seconds_of_slowest_rank"]) <= {"split"}


def test_the_mesh_follows_the_front(alone):
    _, told, cells = alone
    assert told["cells_made_anew"] > 0
    assert len(set(cells["level"].tolist())) > 2
    assert 0 < np.count_nonzero(cells["born"]) < len(cells["gid"])


def boxes(dim: int, cells: dict) -> tuple[np.ndarray, np.ndarray]:
    """Return the lowest and highest corner of each leaf in finest cells, bit by bit."""
    deepest = int(CASES[dim][CASES[dim].index("--levels") + 1])
    low = np.zeros((len(cells["gid"]), dim), np.int64)
    for k, gid in enumerate(cells["gid"].tolist()):
        for place, bit in enumerate(reversed(f"{gid:b}")):
            low[k, place % dim] += int(bit) << (place // dim)
    return low, low + 2 ** (deepest - cells["level"].astype(np.int64))[:, None]


def test_leaves_fill_the_channel_once_and_neighbours_are_those_that_touch(alone):
    dim, told, cells = alone
    low, high = boxes(dim, cells)
    at = CASES[dim].index("--shape") + 1
    shape = np.array([int(n) for n in CASES[dim][at : at + dim]])
    deepest = int(CASES[dim][CASES[dim].index("--levels") + 1])
    filled = np.zeros(shape << deepest, np.int64)
    for k in range(len(low)):
        filled[tuple(map(slice, low[k], high[k]))] += 1
    assert (filled == 1).all()
    around = int(shape[0]) << deepest
    for k in range(len(low)):  # by brute force over all pairs
        touching = np.zeros(len(low), bool)
        for shift in (-around, 0, around):
            moved = np.zeros(dim, np.int64)
            moved[0] = shift
            meet = np.minimum(high[k], high + moved) - np.maximum(low[k], low + moved)
            touching |= ((meet == 0).sum(axis=1) == 1) & (meet >= 0).all(axis=1)
        assert cells["near"][k] == cells["gid"][touching].tolist()
        assert np.abs(cells["level"][touching].astype(int) - int(cells["level"][k])).max() <= 1
    assert told["cells"] == len(low)
