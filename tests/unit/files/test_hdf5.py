"""The home of h5py: every way a file can refuse becomes one FileError line."""

from __future__ import annotations

import subprocess
import sys

import numpy as np
import pytest

from sfcpart.errors import FileError, MeshError
from sfcpart.files.hdf5 import create_hdf5, is_hdf5, read_hdf5


@pytest.fixture
def stored(tmp_path):
    path = tmp_path / "a.h5"
    with create_hdf5(path) as file:
        file.create_dataset("numbers", data=np.arange(10_000), chunks=(500,), compression="gzip")
    return path


def read(path):
    with read_hdf5(path) as file:
        return file["numbers"][...]


def test_what_was_written_comes_back(stored):
    assert is_hdf5(stored)
    np.testing.assert_array_equal(read(stored), np.arange(10_000))


def test_missing_folder_and_foreign_files_are_refused(tmp_path):
    text = tmp_path / "text.h5"
    text.write_text("not HDF5")
    for path, words in [
        (tmp_path / "none.h5", "No such file"),
        (tmp_path, "is a folder"),
        (text, "no HDF5 file"),
    ]:
        with pytest.raises(FileError, match=words) as error:
            read(path)
        assert str(path) in str(error.value)
        assert "\n" not in str(error.value)


def test_a_file_cut_short_is_named_so(stored):
    stored.write_bytes(stored.read_bytes()[:-100])
    with pytest.raises(FileError, match="cut short"):
        read(stored)


def test_a_corrupt_chunk_is_our_error(stored):
    content = bytearray(stored.read_bytes())
    content[-400:] = bytes(400)
    stored.write_bytes(content)
    with pytest.raises(FileError, match="reading HDF5 failed|damaged"):
        read(stored)


def test_a_missing_dataset_is_our_error(stored):
    with pytest.raises(FileError, match="reading HDF5 failed"), read_hdf5(stored) as file:
        file["letters"]


def test_our_own_errors_pass_unchanged(stored):
    with pytest.raises(MeshError, match="mine"), read_hdf5(stored):
        raise MeshError("mine")


def test_a_file_a_writer_holds_is_called_locked(stored):
    hold = "import h5py, sys; f = h5py.File(sys.argv[1], 'r+'); print('held', flush=True); input()"
    with subprocess.Popen(
        [sys.executable, "-c", hold, str(stored)],
        stdin=subprocess.PIPE,
        stdout=subprocess.PIPE,
        text=True,
    ) as writer:
        assert writer.stdout.readline() == "held\n"
        with pytest.raises(FileError, match="locked"):
            read(stored)
        writer.communicate("\n", timeout=30)


def test_a_place_that_cannot_be_written_is_our_error(tmp_path):
    with (
        pytest.raises(FileError, match="cannot be created: No such file"),
        create_hdf5(tmp_path / "none" / "a.h5"),
    ):
        pass
