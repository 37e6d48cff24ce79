"""A report page as text: the figures of summary.json, nothing that breaks out, nothing fetched."""

import base64
import json
import re
from importlib.resources import files

import numpy as np
import pytest

import sfcpart
import sfcpart.measure
from sfcpart.api import graph_of
from sfcpart.errors import FileError
from sfcpart.mesh.shapes import lattice
from sfcpart.report.page import (
    Page,
    compare_page,
    forecast_page,
    parts_table,
    rebalance_page,
    render_page,
    replay_page,
    split_page,
    write_page,
)
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
    assert figures["n_split_parts"].note.startswith("parts 0, 1")


def test_a_re_split_shows_what_moves_and_when_it_pays(tmp_path):
    mesh = lattice((16, 8)).to_mesh()
    work = 1.0 + 3.0 * (mesh.centers[:, 0] > 8)
    result = sfcpart.rebalance(mesh, sfcpart.split(mesh, 4), weights=work, way="shift", steps=500)
    folder = sfcpart.write_rebalance(tmp_path / "parts", mesh, result, report=True)
    text = (folder / "report.html").read_text()
    data = data_of(text)
    told = json.loads((folder / "summary.json").read_text())["rebalance"]
    assert data["summary"]["rebalance"] == told
    assert told["verdict"][1:] in text
    kinds = [section["kind"] for section in data["sections"]]
    assert kinds[:3] == ["view", "matrix", "chart"]
    cells = np.frombuffer(base64.b64decode(data["sections"][1]["value"]["cells"]), "<f8")
    assert cells.sum() == told["migration"]["moved_cells"] > 0
    line = data["sections"][2]["series"][0]
    cost = told["split_seconds"] + told["move_seconds"]
    assert line["y"][0] == pytest.approx(-cost, rel=1e-5)
    slope = (line["y"][1] - line["y"][0]) / (line["x"][1] - line["x"][0])
    assert slope == pytest.approx(told["saved_seconds_a_step"], rel=1e-4)


def test_a_re_split_that_moves_nothing_or_has_no_old_step_has_a_page_too():
    mesh = lattice((8, 4)).to_mesh()
    parts = sfcpart.split(mesh, 2)
    page = page_of(mesh, parts)
    same = rebalance_page(page, sfcpart.rebalance(mesh, parts, way="shift"))
    assert same.verdict[1] == "No cell moves."
    other = rebalance_page(page, sfcpart.rebalance(mesh, parts, n_parts=4, way="shift"))
    assert [section.title for section in other.sections][:3] == [
        "The parts",
        "Who sends cells to whom",
        "Load of each part",
    ]
    assert "cannot be kept" in other.verdict[0]


def test_a_replayed_run_shows_every_rule():
    mesh = lattice((12, 6)).to_mesh()
    place = mesh.centers[:, 0]
    frames = [sfcpart.Frame(mesh, 1.0 + 4.0 * (np.abs(place - k) < 2), steps=50) for k in range(6)]
    found = sfcpart.replay(frames, 3, rules=["never", "every:1", "hindsight"])
    data = data_of(render_page(replay_page(found, title="front")))
    over, price, table = data["sections"]
    assert {one["facet"] for one in over["series"]} == {"never", "every:1", "hindsight"}
    rows = list(found.figures())
    assert table["rows"]["seconds"] == [row["seconds"] for row in rows]
    assert sum(len(name.split(", ")) for name in price["series"][0]["label"]) == 3
    dots = next(o for o in over["series"] if o["facet"] == "every:1" and o["mark"] == "dot")
    assert len(dots["x"]) == rows[1]["n_resplits"] == 5
    alone = sfcpart.replay(frames[:1], 3, rules=["hindsight"])
    assert replay_page(alone).verdict[1] == "No rule differs from another here."


def test_a_forecast_shows_its_counts_and_what_it_leaves_out():
    mesh = lattice((16, 16)).to_mesh()
    found = sfcpart.forecast(mesh, [1, 4, 16], keep=0.6)
    page = forecast_page(found, title="channel")
    text = render_page(page)
    data = data_of(text)
    told = found.to_json_dict()
    table = data["sections"][-1]["rows"]
    for name, values in table.items():
        assert values == [row[name] for row in told["rungs"]]
    assert data["summary"]["weak"] == told["weak"]
    assert "collective operations" in text
    assert page.verdict[0].startswith("Up to ")
    even = forecast_page(sfcpart.forecast(mesh, [1, 4], keep=0.01))
    assert even.verdict[0].startswith("Even the largest count keeps an efficiency of 1 %")
    slow = sfcpart.measure.StepModel.from_preset(latency=1.0)
    none = forecast_page(sfcpart.forecast(mesh, [4], step_model=slow))
    assert none.verdict[0].startswith("No count keeps an efficiency of 80 %")
    assert none.figures[0].text == "none"


def test_parts_can_be_coloured_by_the_ranks_of_nested_levels(mesh):
    parts = sfcpart.split(mesh, 6, levels=(3, 2))
    data = data_of(render_page(page_of(mesh, parts, levels=(3, 2))))
    assert data["sections"][0]["levels"] == {"level 1 of 2": [0, 0, 1, 1, 2, 2]}
