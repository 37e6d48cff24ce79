"""`sfcpart compare`: where partitions come from, tables, files, pictures, what it refuses."""

from __future__ import annotations

import csv
import json

import numpy as np
import pytest
from matplotlib.image import imread
from scipy.ndimage import label

import sfcpart as api
from sfcpart.cli.compare_table import HEADS, LEAST_NEEDED
from sfcpart.comparison import COMPARED_COLUMNS

SECTION = "compare meshes/channel_section.msh"


def _head_of(out: str) -> list[str]:
    """Return the heads of the columns of the printed table."""
    return next(line for line in out.splitlines() if line.startswith("method")).split()


def test_partitions_from_everywhere_join_the_table(sfcpart, meshes):
    mesh = api.read_mesh(meshes / "turbine.vtu")
    body = mesh.cell_fields["body"].astype(int)
    np.save("parts.npy", body)
    np.savetxt("parts.txt", body, fmt="%d")
    assert sfcpart("split meshes/turbine.vtu -n 2 -m rows -o ours -q").code == 0
    line = (
        "compare meshes/turbine.vtu -n 2 -m rows --given field:body --given text:parts.txt "
        "--given npy:./parts.npy --given folder:ours --json"
    )
    told = json.loads(sfcpart(line).out)
    rows = {row["name"]: row for row in told["rows"]}
    assert list(rows) == ["rows", "field", "text", "npy", "folder"]
    own = {"name", "split_seconds", "graph_seconds", "peak_bytes", "run_seconds"}
    same = [{k: v for k, v in rows[name].items() if k not in own} for name in rows]
    assert same[1] == same[2] == same[3]
    assert same[4] == same[0]
    assert same[1] != same[0]


def test_a_path_may_hold_colons(sfcpart):
    np.save("a:b.npy", np.arange(1008) % 2)
    told = json.loads(
        sfcpart("compare meshes/turbine.vtu -n 2 -m rows --given x:a:b.npy --json").out
    )
    assert told["rows"][1]["name"] == "x"


def test_json_and_csv_hold_the_same_figures(sfcpart, tmp_path):
    code, out, err = sfcpart(f"{SECTION} -n 4 -m hilbert -m coordinate --json --csv all.csv")
    assert (code, err) == (0, "")
    told = json.loads(out, parse_constant=lambda name: pytest.fail(f"{name} is no strict JSON"))
    keys = ["name", *(column.name for column in COMPARED_COLUMNS), "failure"]
    with (tmp_path / "all.csv").open() as file:
        table = list(csv.DictReader(file))
    assert list(table[0]) == keys
    for row, line in zip(told["rows"], table, strict=True):
        assert list(row) == keys
        assert {k: "" if v is None else str(v) for k, v in row.items()} == line
    assert told["graph_seconds"] > 0
    assert (told["mesh"], told["n_parts"]) == ("meshes/channel_section.msh", 4)


@pytest.mark.parametrize("mesh", ["channel_section.msh", "channel_mixed.vtu", "turbine.vtu"])
def test_the_table_fits_and_says_what_it_leaves_out(sfcpart, mesh):
    out = sfcpart(f"compare meshes/{mesh} -n 8 -m hilbert -m rows -m smoothed").out
    assert "\u2026" not in out
    assert max(map(len, out.splitlines())) <= 80
    head = _head_of(out)
    assert {"method", "imbal.", "cut", "split", "run"} <= set(head)
    words = " ".join(out.split())
    for name in LEAST_NEEDED[:2]:
        shown = HEADS[name][0] in head
        assert shown or f"not shown {HEADS[LEAST_NEEDED[0]][0]}" in words
    assert "for the cell graph: smoothed" in words


def test_a_wide_terminal_shows_all_columns(sfcpart, monkeypatch):
    monkeypatch.setattr("sfcpart.cli.console.PIPE_WIDTH", 140)
    out = sfcpart(f"{SECTION} -n 4 -m hilbert -m rows").out
    head = _head_of(out)
    assert {"surface", "effic.", "meets", "memory", "/least", "halo"} <= set(head)
    assert "not shown" not in out


def test_marks_stand_at_the_least_of_each_column(sfcpart):
    line = f"{SECTION} -n 4 -m hilbert -m rows -m coordinate"
    rows = {row["name"]: row for row in json.loads(sfcpart(f"{line} --json").out)["rows"]}
    least = min(row["cut_faces"] for row in rows.values())
    lines = {text.split()[0]: text for text in sfcpart(line).out.splitlines() if text}
    for name, row in rows.items():
        assert (f" {row['cut_faces']}*" in lines[name]) == (row["cut_faces"] == least)


def test_the_time_of_a_run_is_that_of_its_steps_and_of_the_split(sfcpart):
    line = f"{SECTION} -n 4 -m hilbert -m rows -m smoothed --json --steps"
    for steps in (1, 1_000_000_000):
        told = json.loads(sfcpart(f"{line} {steps}").out)
        for row in told["rows"]:
            total = row["split_seconds"] + steps * row["step_seconds"]
            assert row["run_seconds"] == pytest.approx(total, rel=1e-12)
        shortest = min(row["run_seconds"] for row in told["rows"])
        names = [row["name"] for row in told["rows"] if row["run_seconds"] == shortest]
        assert told["best"]["run_seconds"] == names
    assert names == [min(told["rows"], key=lambda row: row["step_seconds"])["name"]]


def test_pictures_show_each_split(sfcpart, tmp_path):
    line = f"{SECTION} -n 3 -m hilbert -m rows --picture a.png -q"
    assert sfcpart(line) == (0, "", "")
    image = imread(tmp_path / "a.png")[..., :3]
    spots, _ = label((image < 0.95).any(axis=2))
    assert (np.bincount(spots.ravel())[1:] > 5000).sum() == 2
    assert [entry.name for entry in tmp_path.glob("*.png")] == ["a.png"]


def test_a_picture_of_a_solid_mesh_and_of_bare_centres(sfcpart, tmp_path):
    assert sfcpart("compare meshes/turbine.vtu -n 2 -m rows --picture a.png -q").code == 0
    assert (imread(tmp_path / "a.png")[..., :3] < 0.9).any(axis=2).mean() > 0.05


def test_a_method_that_refuses_says_so_everywhere(sfcpart, tmp_path):
    line = "compare meshes/turbine.vtu -n 2 -m hilbert --limit 1:10 --given bodies:body"
    code, out, _ = sfcpart(f"{line} --csv a.csv --picture a.png")
    assert code == 0
    (reason,) = (
        row["failure"] for row in csv.DictReader((tmp_path / "a.csv").open()) if row["failure"]
    )
    assert " ".join(reason.split()[:4]) in " ".join(out.split())
    assert (tmp_path / "a.png").exists()


@pytest.mark.large  # plain Python leaves `multilevel` out
def test_faces_may_be_weighed(sfcpart):
    line = f"{SECTION} -n 8 -m multilevel --json --face-weight"
    count, measure = (
        json.loads(sfcpart(f"{line} {way}").out)["rows"][0] for way in ("count", "measure")
    )
    assert count["cut_faces"] <= measure["cut_faces"]
    assert measure["cut_measure"] < count["cut_measure"]


REFUSED = [
    ("-n 2 --given body", 2, "'body' is no name"),
    ("-n 2 --given a:body --given a:body", 2, "two partitions are named 'a'"),
    ("-n 2 --repeat 0", 2, "repeat"),
    ("-n 2 --steps 0", 2, "steps"),
    ("-n 2 --face-weight area", 2, "measure"),
    ("-n 2 -m rows -m rows", 3, "named twice"),
    ("-n 1 -m rows --given a:body", 3, "compare into 2 parts"),
    ("-n 2 -m rows --given a:short.npy", 3, "1008"),
    ("-n 2 -m rows --picture no/a.png", 4, "no/a.png: cannot be"),
    ("-n 2 -m hilbert --limit 1:10 --picture a.png", 3, "no method gave a split"),
]


@pytest.mark.parametrize(("options", "code", "words"), REFUSED, ids=[row[0] for row in REFUSED])
def test_what_is_refused(sfcpart, tmp_path, options, code, words):
    np.save("short.npy", np.zeros(5, int))
    before = sorted(tmp_path.iterdir())
    ended = sfcpart(f"compare meshes/turbine.vtu {options}")
    assert ended.code == code, ended.err
    assert words in ended.err
    assert sorted(tmp_path.iterdir()) == before


def test_figures_explains_what_compare_adds(sfcpart):
    listed = json.loads(sfcpart("figures --json").out)
    names = [column["name"] for table in ("run", "total") for column in listed[table]]
    assert names == [column.name for column in COMPARED_COLUMNS]
    assert sfcpart("figures run_seconds").out.startswith("Of a way to split (compare)\nrun_seconds")
