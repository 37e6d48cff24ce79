"""How errors end a rank where no launcher is; with one: `tests/mpi/test_faults.py`."""

from __future__ import annotations

import pytest

from sfcpart.comm.ending import (
    end_rank,
    ending_together,
    found_on,
    remove_half_written,
    removed_on_abort,
)


def test_without_a_launcher_errors_pass_as_they_are():
    with pytest.raises(ValueError, match="no cells"), ending_together():
        raise ValueError("no cells")


def test_a_rank_alone_says_its_error_and_keeps_its_code():
    said: list[str] = []
    assert end_rank(ValueError("no"), text="no", code=5, say=said.append) == 5
    assert said == ["no"]


def test_a_shared_error_is_known_by_its_cause_too():
    cause = ValueError("cell 7")
    cause.on_rank = 3  # type: ignore[attr-defined]
    try:
        raise OSError("cannot be written") from cause
    except OSError as error:
        assert found_on(error) == 3
    assert found_on(OSError()) is None


def test_what_is_half_written_is_removed_only_while_it_is(tmp_path):
    whole, file, folder = tmp_path / "whole", tmp_path / "file", tmp_path / "folder"
    folder.mkdir()
    (folder / "inside").touch()
    with removed_on_abort(whole):
        whole.touch()
    with pytest.raises(ValueError, match="no"), removed_on_abort(folder), removed_on_abort(file):
        file.touch()
        raise ValueError("no")
    remove_half_written()
    assert [entry.name for entry in tmp_path.iterdir()] == ["whole"]
