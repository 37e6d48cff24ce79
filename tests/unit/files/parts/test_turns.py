"""Files and folders that all ranks write to: an error on one is an error on all."""

from __future__ import annotations

import errno
import os

import h5py
import numpy as np
import pytest

from sfcpart.comm import SerialComm, run_ranks
from sfcpart.errors import FileError, PartitionError
from sfcpart.files.parts.folder import shared_folder
from sfcpart.files.parts.tables import write_cell_part
from sfcpart.files.parts.turns import SharedHdf5, Table, write_in_turn
from sfcpart.partition import Partition


@pytest.mark.parametrize("size", [1, 3])
def test_ranks_fill_what_rank_0_lays_out(size, tmp_path):
    path = tmp_path / "a.h5"

    def write(comm):
        shared = SharedHdf5(path, comm)
        shared.lay_out([Table("g/x", 3 * comm.size, np.int16, (2,))], lambda file: None)
        column = shared.column("g/x", 3 * comm.rank)
        column.append(np.full((1, 2), comm.rank))
        column.append(np.full((2, 2), comm.rank + 10))
        shared.lay_out([Table("none", 0, np.float64)], lambda file: file.create_group("later"))
        shared.column("none", 0).append(np.zeros(0))
        shared.flush()

    run_ranks(size, write)
    with h5py.File(path) as file:
        rows = file["g/x"][:].tolist()
        assert rows == [[k, k] for r in range(size) for k in (r, r + 10, r + 10)]
        assert sorted(file) == ["g", "later", "none"]


def test_an_error_of_one_rank_reaches_all(tmp_path):
    rows = [(0, np.zeros(3))]

    def write(comm):
        write_in_turn(tmp_path / "none", rows if comm.rank == 1 else [], comm)

    with pytest.raises(FileError, match="none: cannot be written: No such file"):
        run_ranks(3, write)
    with pytest.raises(FileError, match="cannot be written"):
        write_cell_part(tmp_path / "none" / "a.npy", Partition.from_array([0]), comm=SerialComm())


def test_a_full_disk_on_another_rank_is_told_as_one_here(tmp_path, monkeypatch):
    def fail(*args):
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    def act(comm):
        with shared_folder(tmp_path / "out", comm=comm) as place:
            (place / "note.txt").touch()
            write_in_turn(place / "note.txt", [(0, np.zeros(3))] if comm.rank == 1 else [], comm)

    monkeypatch.setattr(os, "pwrite", fail)
    with pytest.raises(FileError, match=r"out/note\.txt: .*No space.*make room"):
        run_ranks(2, act)
    assert list(tmp_path.iterdir()) == []


def test_a_folder_appears_when_all_are_done(tmp_path):
    def act(comm):
        with shared_folder(tmp_path / "out", comm=comm) as place:
            comm.barrier()
            (place / f"{comm.rank}.txt").write_text("done")
            comm.barrier()
        return (tmp_path / "out" / "1.txt").exists()

    assert run_ranks(3, act) == [True] * 3
    with pytest.raises(FileError, match="holds something already"):
        run_ranks(2, act)


def test_errors_of_other_kinds_pass(tmp_path):
    def act(comm):
        with shared_folder(tmp_path / "out", comm=comm):
            comm.check(PartitionError("no parts") if comm.rank else None)

    with pytest.raises(PartitionError, match="no parts"):
        run_ranks(2, act)
    assert list(tmp_path.iterdir()) == []
