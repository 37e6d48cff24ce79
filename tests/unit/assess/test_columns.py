"""The table of figures is the one source of the documentation."""

from __future__ import annotations

import runpy

from sfcpart.assess import PART_COLUMNS, TOTAL_COLUMNS


def test_the_page_of_figures_is_what_the_table_says(root):
    page = runpy.run_path(str(root / "tools" / "make_figures_page.py"))["page"]()
    written = (root / "docs" / "figures.md").read_text(encoding="utf-8")
    assert written == page + "\n", "run python tools/make_figures_page.py > docs/figures.md"


def test_names_are_said_once_and_meanings_are_sentences():
    for columns in (PART_COLUMNS, TOTAL_COLUMNS):
        names = [column.name for column in columns]
        assert len(set(names)) == len(names)
        assert all(column.meaning.endswith(".") for column in columns)
        assert all(column.better in ("lower", "higher", "") for column in columns)
