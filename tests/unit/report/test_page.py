"""A report page as text: the figures of summary.json, nothing that breaks out, nothing fetched."""

import json
import re
from importlib.resources import files

import numpy as np
import pytest

import sfcpart
from sfcpart.api import graph_of
from sfcpart.errors import FileError
from sfcpart.mesh.shapes import lattice
from sfcpart.report.page import Page, compare_page, parts_table, render_page, split_page, write_page
from sfcpart.report.page import split as split_module


@pytest.fixture(autouse=True)
def small_pictures(monkeypatch):
    monkeypatch.setattr("sfcpart.report.painting.FINE", 1)
    monkeypatch.setattr("sfcpart.report.page.still.WIDTH", 120)


@pytest.fixture(scope="module")
def mesh():
    return lattice((12, 6)).to_mesh()


def page_of(mesh, parts, **how):
    assessment = sfcpart.assess(mesh, parts)
    return split_page(mesh, parts, assessment=assessment, graph=graph_of(mesh), **how)


def data_of(text: str) -> dict:
    """Return the data that stand in a page."""
    found = re.search(r'<script type="application/json" id="page-data">(.*?)</script>', text, re.S)
    return json.loads(found[1])


def test_the_figures_are_those_of_the_summary_and_of_the_table_of_parts(mesh, tmp_path):
    parts = sfcpart.split(mesh, 5)
    sfcpart.write_split(tmp_path / "parts", mesh, parts, report=True)
    summary = json.loads((tmp_path / "parts" / "summary.json").read_text())
    text = (tmp_path / "parts" / "report.html").read_text()
    data = data_of(text)
    assert data["summary"]["total"] == summary["total"]
    table = next(section for section in data["sections"] if section["kind"] == "table")
    assert len(table["rows"]) > 15
    assert {name: summary["part"][name] for name in table["rows"]} == table["rows"]
    shown = re.findall(r'<data data-key="(\w+)" value="([^"]+)">', text)
    assert len(shown) >= 8
    assert {key: json.loads(value) for key, value in shown} == {
        key: summary["total"][key] for key, _ in shown
    }


def test_the_comparison_is_the_one_that_is_printed_as_json(mesh):
    compared = sfcpart.compare(mesh, 4, methods=["hilbert", "rows", "spectral"])
    told = compared.to_json_dict()
    data = data_of(render_page(compare_page(compared, title="channel")))
    table = data["sections"][-1]["rows"]
    assert table["name"] == ["hilbert", "rows", "spectral"]
    for name, values in table.items():
        assert values == [row[name] for row in told["rows"]]
    assert data["summary"]["best"] == told["best"]


def test_a_method_that_failed_is_in_the_table_with_its_reason():
    mesh = sfcpart.Mesh.from_centers(np.arange(20.0).reshape(10, 2))
    compared = sfcpart.compare(mesh, 2, methods=["hilbert", "smoothed"])
    data = data_of(render_page(compare_page(compared)))
    assert [section["kind"] for section in data["sections"]] == ["table"]
    assert "face" in data["sections"][0]["rows"]["failure"][1]


HOSTILE = "</script><b>'\"&\u2028<!--{{ 7 * 7 }}"


def test_hostile_names_stay_text_everywhere(mesh):
    parts = sfcpart.split(mesh, 3)
    text = render_page(page_of(mesh, parts, title=HOSTILE, options={HOSTILE: [HOSTILE]}))
    assert "<b>" not in text.replace("<body>", "")
    assert "49" not in re.search(r"<h1>(.*?)</h1>", text)[1]
    assert data_of(text)["sections"]
    assert text.count("</script>") == text.count("<script")
    table = parts_table.TablePlot(
        HOSTILE,
        "",
        "t",
        [parts_table.ColumnHead("name", HOSTILE, form="text")],
        {"name": [HOSTILE]},
    )
    data = data_of(render_page(Page(HOSTILE, "", [HOSTILE], sections=[table])))
    assert data["sections"][0]["rows"]["name"] == [HOSTILE]


def test_nothing_is_fetched_and_the_policy_of_the_page_forbids_it(mesh):
    text = render_page(page_of(mesh, sfcpart.split(mesh, 3)))
    assert "default-src 'none'" in text
    own = re.sub(r"<script>.*?</script>", "", text, flags=re.S)
    assert re.findall(r'(?:src|href)="(?!data:|#)[^"]*"', own) == []


def test_libraries_ship_with_their_licences_and_versions():
    room = files("sfcpart.report.page") / "libraries"
    licences = (room / "LICENCES.txt").read_text(encoding="utf-8")
    for name in ("three 0.187.0 (MIT)", "@observablehq/plot 0.6.17 (ISC)", "d3-zoom 3.0.1 (ISC)"):
        assert name in licences
    assert "Permission is hereby granted" in licences
    for name in ("charts.min.js", "drawing.min.js"):
        assert len((room / name).read_text(encoding="utf-8")) > 100_000


def test_only_pages_with_a_view_carry_what_draws_in_space(mesh):
    plain = render_page(Page("a", "b", ["c"]))
    assert len(plain) < 80_000
    compared = render_page(compare_page(sfcpart.compare(mesh, 2, methods=["hilbert"])))
    assert len(compared) < 500_000


def test_a_page_replaces_a_file_and_an_error_names_it(tmp_path):
    path = tmp_path / "report.html"
    path.write_text("old")
    write_page(path, Page("a", "b", ["c"]))
    assert path.read_text().startswith("<!doctype html>")
    with pytest.raises(FileError, match="cannot be written"):
        write_page(tmp_path / "none" / "report.html", Page("a", "b", ["c"]))


def test_every_degenerate_mesh_has_a_page(degenerate):
    mesh = degenerate.mesh
    parts = sfcpart.split(mesh, degenerate.n_parts)
    data = data_of(render_page(page_of(mesh, parts)))
    assert data["sections"][0]["kind"] == "view"
    assert sum(data["sections"][0]["scene"]["triangles"]) > 0


def test_bare_centres_have_loads_and_a_table_only():
    mesh = sfcpart.Mesh.from_centers(np.random.default_rng(1).random((60, 3)))
    parts = sfcpart.split(mesh, 4)
    data = data_of(render_page(page_of(mesh, parts)))
    assert [section["kind"] for section in data["sections"]] == ["view", "chart", "table"]


def test_very_many_parts_are_shown_in_part_and_the_page_says_so(mesh, monkeypatch):
    monkeypatch.setattr(parts_table, "MOST_PARTS", 10)
    monkeypatch.setattr(split_module, "MOST_BARS", 20)
    monkeypatch.setattr("sfcpart.report.page.meetings.MOST_ROWS", 16)
    page = page_of(mesh, sfcpart.split(mesh, 40))
    text = render_page(page)
    data = data_of(text)
    load, matrix, table = (
        next(s for s in data["sections"] if s["kind"] == kind)
        for kind in ("chart", "matrix", "table")
    )
    assert len(load["series"][0]["x"]) == 20
    assert (matrix["block"], matrix["size"]) == (3, 14)
    assert len(table["rows"]["part"]) == 10
    for words in ("Shown: 20 of 40 parts", "Each row stands for 3 parts", "The 10 slowest of 40"):
        assert words in text


def test_faults_are_among_the_figures(mesh):
    parts = sfcpart.Partition.from_array(np.arange(72) % 2, 3)
    assessment = sfcpart.assess(mesh, parts, limit_weights=np.ones(72), limits=30.0)
    page = split_page(mesh, parts, assessment=assessment, graph=graph_of(mesh))
    figures = {figure.key: figure for figure in page.figures}
    assert figures["n_empty_parts"].note == "part 2"
    assert figures["limit_share"].text == "120 %"
    assert figures["n_split_parts"].note.startswith("part 0, 1")
