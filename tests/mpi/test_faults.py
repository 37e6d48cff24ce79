"""A rank that fails ends the whole job, with one message that names it; nothing is half-written."""

from __future__ import annotations

import re
import time

import pytest

from tests.mpi.harness import MpiJobError, run_job

SECONDS = 60.0
"""Limit of a job on a busy machine; alone each ends in a second or two."""

ALONE = {
    "bad_value": "ValueError: cell 7 has no centre",
    "bad_exchange": "InputError: an array of shape (7,) to exchange",
    "no_memory": "Unable to allocate 74.5 GiB",
    "two_fail": "ValueError: cell 1 has no centre",
    "half_written": "ValueError: cell 7 has no centre",
}
"""What is found on one rank while others wait in a collective: the job is aborted."""
TOGETHER = {
    "bad_slice": "InputError: centers has shape (4, 5)",
    "full_disk": "OSError: [Errno 27] File too large",
}
"""What is found on one rank and shared: every rank leaves by itself."""


def printed_by(folder) -> str:
    """Run the job that fails as the folder's name says; return what it printed."""
    folder.mkdir()
    with pytest.raises(MpiJobError, match="ended with") as caught:
        run_job("tests.mpi.faults_job", 3, folder, timeout=SECONDS)
    names = {entry.name for entry in folder.iterdir()}
    assert {"before0", "before1", "before2"} <= names  # all had started
    assert not [name for name in names if name.startswith("after")]
    return str(caught.value)


@pytest.mark.parametrize("way", [*ALONE, *TOGETHER])
def test_one_message_names_the_rank(tmp_path, way):
    printed = printed_by(tmp_path / way)
    assert {**ALONE, **TOGETHER}[way] in printed
    assert re.findall(r"rank (\d):", printed) == ["1"]
    assert printed.count("Traceback") == 1
    assert "ended with 1:" in printed


def test_what_is_half_written_is_removed(tmp_path):
    printed_by(tmp_path / "half_written")
    assert not (tmp_path / "half_written" / "parts.tmp").exists()


def test_what_all_ranks_find_is_said_once_and_names_none(tmp_path):
    printed = printed_by(tmp_path / "all_fail")
    assert printed.count("ValueError: no cells") == 1
    assert "rank 0:" not in printed


def test_a_rank_that_a_signal_kills_ends_the_job_and_is_named(tmp_path):
    printed = printed_by(tmp_path / "killed")
    assert "ended with 9:" in printed
    assert re.findall(r"rank (\d) of 3 was killed by a signal", printed) == ["1"]


def test_what_a_killed_rank_had_half_written_is_removed(tmp_path):
    printed_by(tmp_path / "killed_writing")
    left = tmp_path / "killed_writing" / "parts.tmp"
    end = time.monotonic() + SECONDS
    while left.exists() and time.monotonic() < end:  # its witness waits for the other ranks
        time.sleep(0.05)
    assert not left.exists()
