"""Measured seconds and counts of ranks from files."""

from __future__ import annotations

import h5py
import numpy as np
import pytest

from sfcpart.errors import FileError
from sfcpart.files.timings import read_counts, read_timings


def text(place, *lines: str):
    place.write_text("\n".join(lines) + "\n")
    return place


def test_a_long_table_holds_steps_ranks_and_counts(tmp_path):
    rows = ["step,rank,seconds,tetra", "1,1,4,20", "0,0,1,10", "0,1,2,20", "1,0,3,10"]
    (found,) = read_timings(text(tmp_path / "t.csv", *rows))
    assert found.seconds.tolist() == [[1, 2], [3, 4]]
    assert {name: values.tolist() for name, values in found.counts.items()} == {"tetra": [10, 20]}


def test_a_long_table_may_hold_several_partitions(tmp_path):
    rows = ["partition rank seconds", "0 0 1", "0 1 2  # a remark", "", "7 1 4", "7 0 3"]
    first, second = read_timings(text(tmp_path / "t.txt", *rows))
    assert (first.seconds.tolist(), second.seconds.tolist()) == ([[1, 2]], [[3, 4]])
    assert dict(first.counts) == {}


def test_a_wide_table_has_a_row_a_step(tmp_path):
    assert read_timings(text(tmp_path / "t.csv", "1,2,3", "4,5,6"))[0].seconds.shape == (2, 3)
    assert read_timings(text(tmp_path / "u.txt", "1", "2", "3"))[0].seconds.shape == (3,)


def test_arrays_in_binary_files(tmp_path):
    seconds, counts = np.ones((4, 3)), np.arange(3)
    np.save(tmp_path / "t.npy", seconds)
    assert read_timings(tmp_path / "t.npy")[0].seconds.shape == (4, 3)
    np.savez(tmp_path / "t.npz", seconds=seconds, tetra=counts)
    with h5py.File(tmp_path / "t.h5", "w") as file:
        file["seconds"], file["counts/tetra"] = seconds, counts
    for name in ("t.npz", "t.h5"):
        (found,) = read_timings(tmp_path / name)
        assert found.seconds.shape == (4, 3)
        assert found.counts["tetra"].tolist() == [0, 1, 2]


def test_counts_by_themselves(tmp_path):
    place = text(tmp_path / "c.csv", "rank,tetra,zone:4", "1,5,6", "0,3,4")
    assert {k: v.tolist() for k, v in read_counts(place).items()} == {
        "tetra": [3, 5],
        "zone:4": [4, 6],
    }
    assert read_counts(text(tmp_path / "d.csv", "face", "8", "9"))["face"].tolist() == [8, 9]
    with pytest.raises(FileError, match="has no heading"):
        read_counts(text(tmp_path / "e.csv", "1,2"))


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        ([""], "is empty"),
        (["a,b", "1,2"], "has the columns a, b; wanted rank and seconds"),
        (["rank,seconds,rank", "0,1,0"], "each column named once"),
        (["rank,seconds"], "wanted a table of numbers"),
        (["rank,seconds", "0,fast"], "row 0 is '0,fast'; wanted 2 numbers"),
        (["rank,seconds", "0,1,2"], "wanted 2 numbers"),
        (["rank,seconds", "0,1", "2,1"], "ranks are not 0 to 1"),
        (["step,rank,seconds", "0,0,1", "0,1,1", "1,1,2"], "rank 0 has 0 rows for step 1"),
        (["rank,seconds", "0,1", "0,2"], "rank 0 has 2 rows for step 0"),
        (
            ["step,rank,seconds,tetra", "0,0,1,5", "1,0,1,6"],
            "counts of 'tetra' change from step to step",
        ),
    ],
)
def test_tables_that_are_none_are_refused(tmp_path, lines, words):
    with pytest.raises(FileError, match=words):
        read_timings(text(tmp_path / "t.csv", *lines))


def test_files_that_hold_no_times_are_refused(tmp_path):
    with pytest.raises(FileError, match="cannot be read: No such file"):
        read_timings(tmp_path / "none.csv")
    with pytest.raises(FileError, match="cannot be read: No such file"):
        read_counts(tmp_path / "none.csv")
    (tmp_path / "t.csv").write_bytes(b"\xff\xfe\x00")
    with pytest.raises(FileError, match="is no text"):
        read_timings(tmp_path / "t.csv")
    np.save(tmp_path / "t.npy", np.array(["a"]))
    with pytest.raises(FileError, match="holds <U1 values"):
        read_timings(tmp_path / "t.npy")
    (tmp_path / "u.npy").write_bytes(b"no array")
    with pytest.raises(FileError, match="holds no measured seconds"):
        read_timings(tmp_path / "u.npy")
    np.savez(tmp_path / "t.npz", tetra=np.ones(3))
    with pytest.raises(FileError, match="has no array 'seconds'"):
        read_timings(tmp_path / "t.npz")
    with h5py.File(tmp_path / "t.h5", "w") as file:
        file["tetra"] = np.ones(3)
    with pytest.raises(FileError, match="has no dataset 'seconds'"):
        read_timings(tmp_path / "t.h5")
