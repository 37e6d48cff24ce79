"""Lists of moving cells written, read by part and carried out over ranks."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from sfcpart.comm import run_ranks
from sfcpart.errors import FileError, InputError
from sfcpart.files.hdf5 import create_hdf5
from sfcpart.files.parts.moves import read_moves, write_moves
from sfcpart.parallel import carry_out


@pytest.mark.parametrize(("n_old", "n_new"), [(3, 3), (2, 4), (4, 2)])
def test_every_rank_has_the_cells_of_its_new_part(tmp_path, n_old, n_new):
    rng = np.random.default_rng(n_old)
    old = rng.integers(0, n_old, 40).astype(np.int32)
    new = rng.integers(0, n_new, 40).astype(np.int32)
    path = tmp_path / "migration.h5"
    write_moves(path, old, new, n_old_parts=n_old, n_parts=n_new, cell_bytes=8.0)

    def act(comm):
        gid = rng.permutation(np.flatnonzero(old == comm.rank))
        mine = {"gid": gid, "field": 10.0 * gid, "faces": (np.arange(len(gid) + 1), gid)}
        return carry_out(read_moves(tmp_path, comm.rank), mine, comm=comm, cell_gid="gid")

    for rank, here in enumerate(run_ranks(max(n_old, n_new), act)):
        assert here["gid"].tolist() == np.flatnonzero(new == rank).tolist()
        assert here["field"].tolist() == (10.0 * here["gid"]).tolist()
        assert here["faces"].data.tolist() == here["gid"].tolist()


def test_a_part_reads_its_own_lists(tmp_path):
    old, new = np.array([0, 0, 1, 2], np.int32), np.array([1, 2, 1, 0], np.int32)
    write_moves(tmp_path / "m.h5", old, new, n_old_parts=3, n_parts=3, cell_bytes=8.0)
    moves = read_moves(tmp_path / "m.h5", 0)
    assert moves.send_part.tolist() == [1, 2] and moves.send_indptr.tolist() == [0, 1, 2]
    assert moves.send_gid.tolist() == [0, 1]
    assert moves.receive_part.tolist() == [2] and moves.receive_gid.tolist() == [3]
    with pytest.raises(InputError, match="there is no part 3; parts go from 0 to 2"):
        read_moves(tmp_path / "m.h5", 3)


def test_other_files_are_refused(tmp_path):
    with create_hdf5(tmp_path / "other.h5") as file:
        file["x"] = [1]
    with pytest.raises(FileError, match="holds no lists of moving cells"):
        read_moves(tmp_path / "other.h5", 0)
    write_moves(
        tmp_path / "new.h5", np.zeros(1, np.int32), np.zeros(1, np.int32), n_old_parts=1,
        n_parts=1, cell_bytes=1.0,
    )  # fmt: skip
    import h5py

    with h5py.File(tmp_path / "new.h5", "r+") as file:
        file["sfcpart"].attrs["format_version"] = 99
    with pytest.raises(FileError, match="is of version 99; wanted 1"):
        read_moves(tmp_path / "new.h5", 0)


@pytest.fixture
def lists(tmp_path):
    old, new = np.array([0, 0, 1], np.int32), np.array([0, 1, 1], np.int32)
    write_moves(tmp_path / "migration.h5", old, new, n_old_parts=2, n_parts=2, cell_bytes=8.0)
    return [read_moves(tmp_path, part) for part in range(2)]


@pytest.mark.parametrize(
    ("spoil", "text"),
    [
        (lambda gid, m: ({"gid": gid}, m), "there is no array 'cell_gid'"),
        (lambda gid, m: ({"cell_gid": gid}, replace(m, part=0)), "rank 1 was given the lists of"),
        (lambda gid, m: ({"cell_gid": gid}, replace(m, n_parts=5)), "2 ranks for 2 parts before"),
        (lambda gid, m: ({"cell_gid": gid + 7}, m), "part 0 is to send cell 1, which it does not"),
        (lambda gid, m: ({"cell_gid": gid[:0]}, m), "part 0 is to send cell 1, which it does not"),
        (
            lambda gid, m: ({"cell_gid": gid}, replace(m, receive_gid=np.array([5]))),
            "part 0 has 1 cells after the migration, not the 2 of its lists",
        ),
    ],
)
def test_lists_that_do_not_fit_are_refused_by_all_ranks(lists, spoil, text):
    def act(comm):
        gid = np.array([[0, 1], [2, 2]][comm.rank][: 2 - comm.rank])
        arrays, moves = spoil(gid, lists[comm.rank])
        return carry_out(moves, arrays, comm=comm)

    with pytest.raises(InputError, match=text):
        run_ranks(2, act)
