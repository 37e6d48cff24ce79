"""`sfcpart replay`: a table of rules, JSON, CSV and a picture."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import numpy as np
import pytest

from tests.run_files import MESH, write_runs


@pytest.fixture
def runs(sfcpart):
    write_runs()
    return sfcpart


def test_a_series_of_meshes_is_replayed_under_all_rules(runs):
    code, out, err = runs("replay front.h5 -n 6 --csv rules.csv --picture run.png")
    assert (code, err) == (0, "")
    assert out.startswith("front.h5: 6 frames, 60 steps, 128 to ")
    assert "best-period: " in out
    assert Path("run.png").read_bytes()[:4] == b"\x89PNG"
    with Path("rules.csv").open() as file:
        rows = {row["rule"]: row for row in csv.DictReader(file)}
    least = float(rows["hindsight"]["seconds"])
    assert all(float(row["seconds"]) >= least for row in rows.values())
    assert float(rows["hindsight"]["regret"]) == 0
    assert rows["never"]["n_resplits"] == "0"
    assert rows["every:1"]["n_resplits"] == "5"


def test_weights_of_one_mesh_and_the_numbers_of_the_model(runs):
    wish = f"replay weights --mesh {MESH} -n 4 --rule never --rule every:2 --json"
    code, out, err = runs(wish)
    assert (code, err) == (0, "")
    plain = json.loads(out)
    assert plain["n_cells"] == [2784] * 4
    assert plain["steps"] == [1] * 4
    assert [row["resplits"] for row in plain["rules"]] == [[], [2]]
    long = json.loads(runs(f"{wish} --steps 100").out)
    assert long["rules"][0]["seconds"] == pytest.approx(100 * plain["rules"][0]["seconds"])
    dear = json.loads(runs(f"{wish} --resplit-seconds 3 --cell-bytes 0 --split-seconds 0").out)
    assert dear["rules"][1]["resplit_seconds"] == pytest.approx(3, rel=1e-3)
    assert dear["rules"][1]["moved_bytes"] == 0
    by_costs = json.loads(runs(f"{wish} --weight tetra=1,other=9").out)
    assert by_costs["rules"] != plain["rules"]


@pytest.mark.parametrize(
    ("line", "code", "words"),
    [
        ("replay none.h5 -n 4", 4, "none.h5: cannot be read: No such file"),
        (f"replay {MESH} -n 4", 4, "is no series; wanted an HDF5 file, a PVD file or a folder"),
        ("replay empty -n 4", 4, "the folder holds no meshes; wanted one file a frame"),
        ("replay front.h5", 2, "Missing option"),
        ("replay front.h5 -n 4 --rule often", 3, "unknown rule 'often'"),
        ("replay front.h5 -n 1000", 5, "1000 parts were asked for"),
        ("replay front.h5 -n 4 --resplit-seconds nan", 3, "seconds of a re-split is nan"),
        ("replay front.h5 -n 4 -w depth", 3, "depth"),
        ("replay weights -n 4", 4, "the folder holds no meshes"),
        (f"replay negative --mesh {MESH} -n 4", 3, "cell 3 has weight -1.0"),
        (f"replay short --mesh {MESH} -n 4", 3, "holds 7 values; wanted 2784"),
    ],
)
def test_bad_input_ends_in_one_line_and_nothing_is_written(runs, line, code, words):
    for name, values in {
        "empty": None,
        "negative": np.where(np.arange(2784) == 3, -1.0, 1.0),
        "short": np.ones(7),
    }.items():
        Path(name).mkdir()
        if values is not None:
            np.save(f"{name}/0.npy", values)
    before = sorted(Path().iterdir())
    found, out, err = runs(f"{line} --picture a.png --csv a.csv")
    assert (found, out) == (code, "")
    assert words in err
    assert code == 2 or err.count("\n") == 1
    assert sorted(Path().iterdir()) == before


def test_quiet_prints_nothing(runs):
    assert runs("replay front.h5 -n 4 --rule never -q") == (0, "", "")
