"""The table of figures is the one source of the documentation."""

from __future__ import annotations

from sfcpart.assess import PART_COLUMNS, TOTAL_COLUMNS
from sfcpart.manual import read_page
from sfcpart.manual.figures_page import page


def test_the_page_of_figures_is_what_the_table_says():
    again = "python -m sfcpart.manual.figures_page > sfcpart/manual/figures.md"
    assert read_page("figures") == page() + "\n", f"run {again}"


def test_names_are_said_once_and_meanings_are_sentences():
    for columns in (PART_COLUMNS, TOTAL_COLUMNS):
        names = [column.name for column in columns]
        assert len(set(names)) == len(names)
        assert all(column.meaning.endswith(".") for column in columns)
        assert all(column.better in ("lower", "higher", "") for column in columns)
