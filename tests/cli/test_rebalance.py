"""`sfcpart rebalance`: where old splits and cells come from, what it writes, what it refuses."""

from __future__ import annotations

import json

import numpy as np
import pytest

import sfcpart as api

SECTION = "rebalance meshes/channel_section.msh"


@pytest.fixture
def section(meshes):
    """Give the section of the channel."""
    return api.read_mesh(meshes / "channel_section.msh")


def test_the_verdict_comes_first_and_the_folder_holds_the_lists(sfcpart, section, tmp_path):
    assert sfcpart("split meshes/channel_section.msh -n 6 -o old -q").code == 0
    work = np.where(section.centers[:, 0] < section.centers[:, 0].mean(), 1.0, 4.0)
    np.save("work.npy", work)
    line = f"{SECTION} --from old --way shift --steps 100000 -o new --tolerance 0.1"
    code, out, err = sfcpart(f"{line} -n 5")
    assert (code, err) == (0, "")
    assert "channel_section.msh: " in out and "into 5 parts again by shift" in out
    assert "re-split now: the old split cannot be kept" in out.lower()
    assert "migration.h5" in out and "times the least possible" in out
    summary = json.loads((tmp_path / "new" / "summary.json").read_text())
    assert summary["rebalance"]["way"] == "shift"
    old, new = np.load("old/cell_part.npy"), np.load("new/cell_part.npy")
    for part in range(6):
        moves = api.read_moves("new", part)
        gone = np.flatnonzero((old == part) & (new != part))
        come = np.flatnonzero((old != part) & (new == part))
        assert np.sort(moves.send_gid).tolist() == gone.tolist()
        assert np.sort(moves.receive_gid).tolist() == come.tolist()


def test_all_ways_are_tried_and_told(sfcpart, section):
    np.savetxt("old.txt", np.arange(section.n_cells) % 4, fmt="%d")
    code, out, err = sfcpart(f"{SECTION} --from old.txt")
    assert (code, err) == (0, "")
    words = " ".join(out.split())
    assert "tried shift refused (the old parts are no stretches of the curve" in words
    told = json.loads(sfcpart(f"{SECTION} --from old.txt --json").out)
    assert [trial["name"] for trial in told["trials"]] == ["shift", "smooth", "scratch"]
    assert told["way"] in ("smooth", "scratch")
    assert told["verdict"].split(":")[0] in ("re-split now", "keep the old split")
    assert told["migration"]["moved_cells"] == sum(told["migration"]["pairs"]["cells"])


def test_quiet_says_nothing(sfcpart, section):
    np.save("old.npy", np.arange(section.n_cells) % 2)
    assert sfcpart(f"{SECTION} --from old.npy --way scratch -q") == (0, "", "")


def test_cells_come_from_parents_or_from_the_nearest_old_cell(sfcpart, section):
    n = section.n_cells
    old = api.split(section, 4)
    np.save("old.npy", old.cell_part)
    np.savetxt("parent.txt", np.arange(n), fmt="%d")
    np.save("merged.npy", np.arange(n))
    nothing = {"--parent parent.txt", "--merged-into merged.npy"}
    nothing |= {"--old-mesh meshes/channel_section.msh", ""}
    for how in sorted(nothing):
        told = json.loads(sfcpart(f"{SECTION} --from old.npy --way shift {how} --json").out)
        assert told["migration"]["moved_cells"] == 0
    other = "rebalance meshes/channel_mixed.vtu --from old.npy --way scratch"
    assert sfcpart(f"{other} --old-mesh meshes/channel_section.msh").code == 3  # 2-D and 3-D
    assert sfcpart(f"split meshes/channel_section.msh -n 4 -o parts -q").code == 0  # noqa: F541
    told = json.loads(sfcpart(f"{SECTION} --from parts --way shift --parent parent.txt --json").out)
    assert told["migration"]["moved_cells"] == 0


@pytest.mark.parametrize(
    ("line", "code", "text"),
    [
        ("", 2, "Missing option '--from'"),
        ("--from old.npy --way best", 2, "unknown way 'best'"),
        ("--from old.npy --steps 0", 2, "--steps"),
        ("--from old.npy --picture", 2, "--picture needs a folder"),
        ("--from old.npy -n 3 --levels 2x2", 2, "--levels 2x2 makes 4 parts"),
        ("--from short.npy", 3, "short.npy: holds 3 values"),
        ("--from nowhere.npy", 4, "nowhere.npy"),
        ("--from odd.npy", 5, "cell 1 is in part -2"),
        ("--from old.npy --parent nothing", 3, "there is no cell field 'nothing'"),
        ("--from old.npy --parent far.npy", 3, "the parent of cell 0 is 99999"),
        ("--from short.npy --merged-into short.npy", 3, "nothing tells which old cell"),
        ("--from old.npy -w nothing", 3, "nothing"),
        ("--from old.npy --way shift", 5, "the old parts are no stretches of the curve"),
        ("--from old.npy -n 3 --way smooth", 5, "2 parts cannot be smoothed into 3"),
    ],
)
def test_what_cannot_be_is_told_in_one_line_and_leaves_nothing(
    sfcpart, section, tmp_path, line, code, text
):
    n = section.n_cells
    np.save("old.npy", np.arange(n) % 2)
    np.save("short.npy", np.array([0, 1, 1]))
    np.save("odd.npy", np.where(np.arange(n) == 1, -2, 0))
    np.save("far.npy", np.full(n, 99999))
    ended = sfcpart(f"{SECTION} {line} {'' if '--picture' in line else '-o new'}")
    assert (ended.code, ended.out) == (code, "")
    assert text in ended.err and ended.err.count("\n") == 1
    assert not (tmp_path / "new").exists()
