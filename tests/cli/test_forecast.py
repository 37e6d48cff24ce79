"""`sfcpart forecast`, and `--report` of the other verbs, as typed."""

from __future__ import annotations

import csv
import json

import pytest

CHANNEL = "meshes/channel_mixed.vtu"


def test_the_table_fits_80_columns_and_says_what_is_left_out(sfcpart):
    code, out, err = sfcpart(f"forecast {CHANNEL} --parts 1:64")
    assert (code, err) == (0, "")
    assert max(map(len, out.splitlines())) <= 80
    lines = out.splitlines()
    assert lines[0] == f"{CHANNEL}: 2,784 cells"
    assert lines[1].startswith("Up to ")
    table = lines.index(next(line for line in lines if line.startswith("parts cells")))
    assert [line.split()[0] for line in lines[table + 1 : table + 8]] == [
        *("1", "2", "4", "8", "16", "32", "64")
    ]
    assert "collective operations" in " ".join(out.split())


def test_json_csv_and_report_agree(sfcpart, tmp_path):
    line = f"forecast {CHANNEL} -n 2,8 --csv a.csv --report a.html --json --weight work"
    code, out, _ = sfcpart(line)
    assert code == 0
    told = json.loads(out)
    assert [row["n_parts"] for row in told["rungs"]] == [2, 8]
    rows = list(csv.DictReader((tmp_path / "a.csv").open()))
    assert [float(row["step_seconds"]) for row in rows] == [
        row["step_seconds"] for row in told["rungs"]
    ]
    page = (tmp_path / "a.html").read_text()
    assert page.startswith("<!doctype html>")
    assert str(told["rungs"][1]["step_seconds"]) in page


@pytest.mark.parametrize("counts", ["", "a:b", "1:2:3:4", "8:2", "4,x", "1:4:0"])
def test_counts_that_are_none_are_refused_with_an_example(sfcpart, counts):
    code, out, err = sfcpart(f"forecast {CHANNEL} --parts '{counts}'")
    assert (code, out) == (2, "")
    assert len(err.splitlines()) == 1


def test_quiet_prints_nothing(sfcpart):
    assert sfcpart(f"forecast {CHANNEL} --parts 2:4:2 --quiet")[:2] == (0, "")


@pytest.mark.parametrize(
    "line",
    [
        f"assess {CHANNEL} --field row --report page.html",
        f"compare {CHANNEL} -n 4 -m hilbert -m rows --report page.html",
    ],
)
def test_reports_are_written_where_asked(sfcpart, tmp_path, line):
    code, out, err = sfcpart(line)
    assert (code, err) == (0, ""), err
    page = (tmp_path / "page.html").read_text()
    assert page.startswith("<!doctype html>")
    assert "channel_mixed.vtu" in page
    verdict = " ".join(out.split("\n\n")[0].split("\n")[1:])
    for sentence in verdict.split(". "):
        assert sentence.strip(".").replace("'", "&#39;") in page.replace("\n", " ")


def test_split_writes_its_report_into_the_folder(sfcpart, tmp_path):
    code, out, _ = sfcpart(f"split {CHANNEL} -n 4 -o parts --report")
    assert code == 0
    assert "report.html" in out
    assert (tmp_path / "parts" / "report.html").exists()
    assert sfcpart(f"split {CHANNEL} -n 4 --report").code == 2
