"""Report pages in a real browser, opened from a file: nothing is asked of the network.

Accessibility: the rules of axe-core (WCAG 2.1 A and AA), shipped by the package axe-core-python.
"""

from __future__ import annotations

import base64
import io
import json
from pathlib import Path

import numpy as np
import pytest

import sfcpart
from sfcpart.graph import cell_graph
from sfcpart.mesh.channel import channel_water
from sfcpart.mesh.shapes import lattice
from sfcpart.report.page import (
    compare_page,
    forecast_page,
    rebalance_page,
    replay_page,
    split_page,
    write_page,
)
from tests.browser.conftest import start

pytestmark = pytest.mark.large

HOSTILE = "</script><script>window.bad = 1</script><img src=x onerror='window.bad=1'>&amp;\u2028'\""


def page_of(mesh, n_parts: int, **how):
    """Split a mesh and make its page."""
    partition = sfcpart.split(mesh, n_parts)
    assessment = sfcpart.assess(mesh, partition)
    return split_page(mesh, partition, assessment=assessment, graph=cell_graph(mesh), **how)


@pytest.fixture(scope="module")
def pages(tmp_path_factory) -> dict[str, Path]:
    """Write a page of each kind."""
    folder = tmp_path_factory.mktemp("pages")
    flat = lattice((24, 12)).to_mesh()
    solid = channel_water(24, 6, n_across=6).to_mesh()
    compared = sfcpart.compare(flat, 6, methods=["hilbert", "rows", "coordinate"])
    work = 1.0 + 4.0 * (solid.centers[:, 0] > solid.centers[:, 0].mean())
    again = sfcpart.rebalance(solid, sfcpart.split(solid, 8), weights=work, way="shift")
    place = flat.centers[:, 0]
    frames = [sfcpart.Frame(flat, 1.0 + 4.0 * (abs(place - 3 * k) < 3), steps=9) for k in range(8)]
    made = {
        "solid": page_of(solid, 16, title="Skerry Channel", levels=(4, 4)),
        "flat": page_of(flat, 6, title="lattice"),
        "thousand": page_of(lattice((20, 20, 10)).to_mesh(), 1000, title="thousand"),
        "hostile": page_of(flat, 3, title=HOSTILE, options={HOSTILE: HOSTILE}),
        "rebalance": rebalance_page(page_of(solid, 8), again),
        "replay": replay_page(sfcpart.replay(frames, 4, rules=["never", "every:1", "hindsight"])),
        "forecast": forecast_page(sfcpart.forecast(solid, [1, 4, 16, 64])),
        "compare": compare_page(compared, title="lattice", n_cells=flat.n_cells),
    }
    for name, page in made.items():
        write_page(folder / f"{name}.html", page)
    return {name: folder / f"{name}.html" for name in made}


KINDS = ["solid", "flat", "thousand", "hostile", "rebalance", "replay", "forecast", "compare"]


@pytest.mark.parametrize("kind", KINDS)
def test_a_page_opens_without_complaint_or_request(reader, pages, kind):
    reader.open(pages[kind])
    assert reader.complaints() == []
    assert reader.requests() == [pages[kind].as_uri()]


LOOKED_AT = ["solid light", "solid dark", "compare dark", "replay light", "forecast dark"]


@pytest.mark.parametrize("look", LOOKED_AT)
def test_axe_finds_nothing_to_mend(reader, pages, look):
    kind, scheme = look.split()
    import axe_core_python

    reader.show_as(scheme=scheme)
    reader.open(pages[kind])
    script = Path(axe_core_python.__file__).with_name("axe.min.js").read_text(encoding="utf-8")
    reader.ask(script)
    found = reader.browser.execute_async_script(
        "const done = arguments[0]; axe.run().then((r) => done(r.violations.map("
        "(v) => [v.id, v.help, v.nodes.map((n) => n.html.slice(0, 160)).slice(0, 3)])))"
    )
    assert found == []


def test_hostile_names_stay_text(reader, pages):
    reader.open(pages["hostile"])
    assert reader.ask("return window.bad === undefined && document.images.length === 1")
    assert reader.texts("h1") == [HOSTILE]
    assert HOSTILE in reader.texts(".notes dd")


def column(reader, number: int) -> list[float]:
    """Return the numbers of a column of the table as shown."""
    cells = reader.texts(f"section.table tbody tr > :nth-child({number})")
    return [float(text.replace(",", "").split()[0]) for text in cells]


def test_the_table_sorts_both_ways_by_clicks_and_keys(reader, pages):
    reader.open(pages["solid"])
    place = reader.texts("section.table thead th").index("halocells") + 1
    head = f"section.table thead th:nth-child({place})"
    reader.find(f"{head} button").click()
    first = column(reader, place)
    assert reader.find(head).get_attribute("aria-sort") == "descending"
    assert first == sorted(first, reverse=True)
    assert first[0] > first[-1]
    reader.find(f"{head} button").send_keys("\n")
    assert column(reader, place) == first[::-1]
    assert reader.find(head).get_attribute("aria-sort") == "ascending"


def test_the_table_searches_by_number_and_by_condition(reader, pages):
    reader.open(pages["thousand"])
    search = "section.table input[type=search]"
    assert len(column(reader, 1)) == 50
    reader.choose(search, "7, 990-992")
    assert sorted(column(reader, 1)) == [7, 990, 991, 992]
    reader.choose(search, "neighbours >= 6")
    assert min(column(reader, 7)) >= 6
    reader.choose(search, "nothing here")
    assert column(reader, 1) == []
    reader.choose(search, "")
    reader.find("section.table p button").click()
    assert len(column(reader, 1)) == 1000


def test_the_copied_csv_is_the_table_of_the_split(reader, pages):
    reader.open(pages["solid"])
    reader.choose("section.table input[type=search]", "3")
    text = reader.ask(
        "return sfcpartPage.drawn[sfcpartPage.data.sections.findIndex("
        "(section) => section.kind === 'table')].csv()"
    )
    heads, row, end = text.split("\n")
    assert heads.startswith("part,cells,weight,")
    assert end == ""
    assert row.startswith("3,")
    reader.find("section.table .controls button:last-of-type").click()
    reader.browser.execute_async_script("setTimeout(arguments[0], 50)")
    assert reader.texts("section.table [role=status]") == ["1 rows copied"]


def drawn(reader, selector: str) -> np.ndarray:
    """Return what a canvas shows, (rows, columns, 4)."""
    from PIL import Image

    url = reader.ask("return document.querySelector(arguments[0]).toDataURL()", selector)
    return np.asarray(Image.open(io.BytesIO(base64.b64decode(url.split(",")[1]))).convert("RGBA"))


VIEW = "section.view canvas"


@pytest.mark.parametrize(("kind", "n_colours"), [("solid", 4), ("flat", 3)])
def test_the_view_draws_parts_in_their_colours(reader, pages, kind, n_colours):
    reader.open(pages[kind])
    image = drawn(reader, VIEW)
    solid = image[image[..., 3] == 255]
    assert len(solid) > 0.1 * image[..., 3].size
    _, count = np.unique(solid[:, :3] // 64, axis=0, return_counts=True)
    assert np.sum(count > 0.01 * len(solid)) >= n_colours
    assert not reader.find("section.view .still").is_displayed()


def test_the_view_answers_slider_keys_mouse_and_choices(reader, pages):
    from selenium.webdriver import ActionChains

    reader.open(pages["solid"])
    seen = [drawn(reader, VIEW)]

    def changed(what: str) -> None:
        reader.wait_a_frame()
        seen.append(drawn(reader, VIEW))
        assert not np.array_equal(seen[-1], seen[-2]), what

    reader.choose("section.view input[type=range]", "0.8")
    changed("pulled apart")
    reader.find(VIEW).send_keys("\ue014")  # arrow to the right
    changed("turned by a key")
    reader.find(VIEW).send_keys("+")
    changed("nearer by a key")
    ActionChains(reader.browser).drag_and_drop_by_offset(reader.find(VIEW), 60, 25).perform()
    changed("turned by the mouse")
    for way in ("load", "halo share", "level 1 of 2"):
        reader.choose("section.view select", way)
        changed(f"coloured by {way}")
    reader.choose("section.view input[type=text]", "0-3")
    changed("four parts alone")
    assert reader.texts("section.view [role=status]") == ["4 of 16 parts shown"]
    reader.find("section.view .controls button").click()
    changed("those four hidden")
    assert reader.texts("section.view [role=status]") == ["12 of 16 parts shown"]
    reader.choose("section.view select", "part")
    reader.find("section.view .controls button:last-of-type").click()
    reader.wait_a_frame()
    assert np.array_equal(drawn(reader, VIEW), seen[0])
    reader.find(VIEW).click()
    assert reader.texts("section.view [role=status]")[0].startswith("Part ")


def test_the_matrix_shows_all_pairs_and_zooms(reader, pages):
    reader.open(pages["thousand"])
    matrix = "section.matrix canvas"
    whole = drawn(reader, matrix)
    pairs = int(reader.find(matrix).get_attribute("data-entries"))
    assert pairs > 4000  # a lattice of 1,000 boxes: most have 4 to 6 neighbours
    reader.find(matrix).send_keys("+")
    reader.wait_a_frame()
    assert float(reader.find(matrix).get_attribute("data-zoom")) == 1.5
    near = drawn(reader, matrix)
    assert not np.array_equal(near, whole)
    for _ in range(6):
        reader.find("section.matrix .controls button").click()
    assert float(reader.find(matrix).get_attribute("data-zoom")) > 60
    reader.find(matrix).send_keys("0")
    reader.wait_a_frame()
    assert np.array_equal(drawn(reader, matrix), whole)
    reader.choose("section.matrix input", "17")
    assert reader.texts("section.matrix [role=status]")[0].startswith("part 17, faces between")


def test_a_phone_scrolls_down_only(reader, pages):
    for kind in ("solid", "compare", "replay", "forecast"):
        reader.size(390, 800)
        reader.open(pages[kind])
        wide = reader.ask("return document.documentElement.scrollWidth")
        assert wide <= 390, kind


def test_print_shows_the_picture_and_no_controls(reader, pages):
    reader.open(pages["solid"])
    reader.show_as(media="print")
    assert reader.find("section.view .still").is_displayed()
    assert not reader.find(VIEW).is_displayed()
    assert not reader.find("section.table .controls").is_displayed()
    paper = reader.browser.execute_cdp_cmd("Page.printToPDF", {"printBackground": True})
    assert base64.b64decode(paper["data"])[:5] == b"%PDF-"


def test_every_control_is_reached_by_the_tab_key(reader, pages):
    reader.open(pages["solid"])
    wanted = reader.ask(
        "return document.querySelectorAll('a[href], button:not([disabled]):not([hidden]), "
        'select, input, [tabindex="0"]\').length'
    )
    reached = set()
    for _ in range(wanted + 3):
        reader.browser.switch_to.active_element.send_keys("\t")
        reached.add(reader.browser.switch_to.active_element.id)
    assert len(reached) >= wanted


def test_figures_shown_are_those_of_the_data(reader, pages):
    reader.open(pages["solid"])
    told = reader.ask(
        "return [...document.querySelectorAll('data')].map((e) => [e.dataset.key, e.value])"
    )
    total = reader.ask("return sfcpartPage.data.summary.total")
    assert len(told) >= 8
    assert {key: json.loads(value) for key, value in told} == {key: total[key] for key, _ in told}


def test_without_webgl_the_picture_stands_in(pages):
    from tests.browser.conftest import Reader

    blind = start("--disable-gpu", "--disable-3d-apis")
    try:
        person = Reader(blind)
        person.open(pages["solid"])
        assert person.find("section.view .still").is_displayed()
        assert blind.find_elements("css selector", VIEW) == []
        assert "WebGL" in " ".join(person.texts("section.view p"))
    finally:
        blind.quit()
