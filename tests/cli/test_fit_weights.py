"""`sfcpart fit-weights`, from measured seconds to a split by them."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from tests.run_files import COSTS, MESH, write_times


@pytest.fixture
def measured(sfcpart):
    np.save("parts.npy", np.arange(2784) * 8 // 2784)
    write_times(parts="parts.npy")
    return sfcpart


def test_costs_of_cells_and_faces_are_found_and_weigh_a_split(measured):
    measured(f"split {MESH} -n 8 -o parts -q")
    write_times()
    count = f"--mesh {MESH} --parts parts --by cell --by face"
    code, out, err = measured(f"fit-weights times.csv {count} -o costs.json")
    assert (code, err) == (0, "")
    assert out.startswith("8 ranks with cells, 2 steps")
    assert "wrote costs.json; use it as --weight costs.json" in out
    assert "note: speeds are not fitted: one table of counts" in out
    content = json.loads(Path("costs.json").read_text())
    assert content["cost"] == pytest.approx(COSTS, rel=0.05)
    assert set(content["standard_error"]) == set(COSTS)
    by_file = measured(f"split {MESH} -n 5 -w costs.json --json").out
    assert json.loads(by_file)["total"]["imbalance"] < 0.02
    assert measured(f"assess {MESH} parts -w costs.json*work --json").code == 3  # no such spelling
    assert measured(f"assess {MESH} parts -w costs.json -w work --json").code == 0
    assert measured(f"compare {MESH} -n 5 -m hilbert -w costs.json --json").code == 0


def test_three_ways_to_give_counts_agree(measured):
    ways = (
        "times.csv --counts counts.csv",
        "measured.csv",
        f"times.csv --mesh {MESH} --parts parts.npy --by cell --by face",
    )
    found = [json.loads(measured(f"fit-weights {way} --json").out) for way in ways]
    assert found[0] == found[1] == found[2]
    assert found[0]["classes"] == list(COSTS)


def test_speeds_of_ranks_come_out_of_two_partitions(measured):
    np.save("other.npy", np.arange(2784)[::-1] // 3 % 8)
    write_times(parts="other.npy", seconds="more.csv")
    for name in ("times.csv", "more.csv"):
        rows = [line.split(",") for line in Path(name).read_text().splitlines()[1:]]
        slow = [f"{s},{r},{float(t) * (2 if r == '3' else 1)}" for s, r, t in rows]
        Path(name).write_text("\n".join(["step,rank,seconds", *slow]) + "\n")
    count = f"--mesh {MESH} --parts parts.npy --parts other.npy --by cell --by face"
    out = measured(f"fit-weights times.csv more.csv {count} -o costs.json").out
    assert "speeds: rank 3 is slowest (0.5" in out
    speeds = json.loads(Path("costs.json").read_text())["speed"]
    assert min(speeds) == pytest.approx(max(speeds) / 2, rel=0.05)
    code, out, err = measured(f"split {MESH} -n 8 -w costs.json --speeds costs.json --json")
    assert (code, err) == (0, "")
    assert json.loads(out)["total"]["imbalance"] < 0.05
    code, _, err = measured(f"split {MESH} -n 4 --speeds costs.json")
    assert code == 3
    assert "wanted one number for each of the 4 parts" in err


@pytest.mark.parametrize(
    ("line", "code", "words"),
    [
        ("fit-weights", 2, "Missing argument"),
        ("fit-weights times.csv", 3, "the files of seconds hold no counts; give --mesh"),
        ("fit-weights none.csv --counts counts.csv", 4, "none.csv: cannot be read"),
        ("fit-weights times.csv --mesh M", 2, "--mesh goes with --parts"),
        ("fit-weights times.csv --parts parts.npy", 2, "--mesh goes with --parts"),
        ("fit-weights times.csv --counts counts.csv --mesh M --parts p", 2, "give either --mesh"),
        ("fit-weights times.csv --mesh M --parts p --field f", 2, "not both"),
        ("fit-weights times.csv --counts counts.csv --by kind", 2, "--by counts cells of --mesh"),
        ("fit-weights times.csv times.csv --counts counts.csv", 3, "of 2 partitions and counts of"),
        (f"fit-weights times.csv --mesh {MESH} --parts parts.npy --by depth", 3, "no cell field"),
        (f"fit-weights times.csv --mesh {MESH} --field row", 3, "wanted (7,)"),
        ("fit-weights times.csv --counts counts.csv --speeds fit", 3, "speeds cannot be fitted"),
        ("fit-weights times.csv --counts counts.csv -o a.txt", 4, "must end in .json"),
        ("fit-weights nan.csv --counts counts.csv -o a.json", 3, "is nan; wanted numbers >= 0"),
        ("fit-weights below.csv --counts counts.csv -o a.json", 3, "is -1.0; wanted numbers"),
        ("fit-weights times.csv --counts twins.csv -o a.json", 3, "'a', 'b' cannot be told apart"),
        ("fit-weights times.csv --counts odd.csv -o a.json", 3, "'flame' is no class of cells"),
        (
            "fit-weights few.csv --counts few_counts.csv -o a.json",
            3,
            "too few observations: 1 rank",
        ),
    ],
)
def test_bad_input_ends_in_one_line_and_nothing_is_written(measured, line, code, words):
    ones = "\n".join(["1,2"] * 8)
    Path("nan.csv").write_text("1,1,1,nan,1,1,1,1\n")
    Path("below.csv").write_text("1,1,1,-1,1,1,1,1\n")
    Path("twins.csv").write_text(f"a,b\n{ones}\n")
    Path("odd.csv").write_text("flame\n" + "\n".join("12345678") + "\n")
    Path("few.csv").write_text("1\n")
    Path("few_counts.csv").write_text("cell,face\n1,2\n")
    before = sorted(Path().iterdir())
    found, out, err = measured(line)
    assert (found, out) == (code, "")
    assert words in err
    assert code == 2 or err.count("\n") == 1
    assert sorted(Path().iterdir()) == before


def test_without_a_file_the_costs_are_printed(measured):
    code, out, err = measured("fit-weights measured.csv --speeds alike")
    assert (code, err) == (0, "")
    assert [line.split()[0] for line in out.splitlines()[3:5]] == list(COSTS)
    assert "speeds" not in out
    assert "hard to tell apart" in out
    assert not Path("costs.json").exists()


def test_quiet_prints_nothing(measured):
    assert measured("fit-weights measured.csv -q -o costs.json") == (0, "", "")
    assert Path("costs.json").exists()
