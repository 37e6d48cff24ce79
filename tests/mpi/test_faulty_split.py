"""`sfcpart split` on three ranks, one of which fails: one line names it, nothing is left behind."""

from __future__ import annotations

import pytest

from tests.mpi.harness import MpiJobError, run_job

SECONDS = 90.0
"""Limit on a busy machine; alone each job ends within a few seconds."""


def told_by(tmp_path, root, way: str) -> tuple[str, list[str]]:
    """Run the job; return what it printed, but for notes, and what lies in its folder after it."""
    folder = tmp_path / way
    folder.mkdir(exist_ok=True)
    (folder / "mesh").write_text(str(root / "meshes" / "turbine.vtu"))
    try:
        run_job("tests.mpi.faulty_split_job", 3, folder, timeout=SECONDS)
        printed = ""
    except MpiJobError as error:
        assert "ran over" not in str(error)
        printed = str(error)
    names = sorted(entry.name for entry in folder.iterdir() if entry.name != "mesh")
    return printed, names


@pytest.mark.parametrize(
    ("way", "code", "line"),
    [
        ("bad_slice", 3, "sfcpart: error: rank 1: cell 7 of the slice has no points"),
        ("full_disk", 4, "sfcpart: error: rank 1: "),
        ("no_memory", 6, "sfcpart: error: rank 1: not enough memory: Unable to allocate 74.5 GiB"),
    ],
)
def test_one_line_names_the_rank_and_nothing_is_left(tmp_path, root, way, code, line):
    printed, names = told_by(tmp_path, root, way)
    lines = [row for row in printed.splitlines()[1:] if "error" in row or "Traceback" in row]
    assert len(lines) == 1, printed
    assert lines[0].startswith(line)
    assert f"ended with {code}:" in printed
    assert names == []


def test_what_a_killed_rank_leaves_is_removed_by_the_next_run(tmp_path, root):
    printed, names = told_by(tmp_path, root, "killed")
    assert "ended with 9:" in printed
    assert "parts" not in names
    (tmp_path / "killed").rename(tmp_path / "sound")
    printed, names = told_by(tmp_path, root, "sound")
    assert (printed, names) == ("", ["parts"])


def test_a_traceback_on_demand_ends_the_job_too(tmp_path, root, monkeypatch):
    monkeypatch.setenv("SFCPART_DEBUG", "1")
    printed, names = told_by(tmp_path, root, "bad_slice")
    assert printed.count("Traceback") == 1
    assert "sfcpart: error: rank 1: cell 7 of the slice has no points" in printed
    assert names == []
