"""The table of figures is the one source of the documentation."""

from __future__ import annotations

from sfcpart.manual import read_page
from sfcpart.measure import PART_COLUMNS, TOTAL_COLUMNS


def test_the_manual_names_every_figure_and_its_unit():
    text = read_page("figures")
    for column in (*PART_COLUMNS, *TOTAL_COLUMNS):
        assert f"| `{column.name}` | {column.unit} |" in text


def test_names_are_said_once_and_meanings_are_sentences():
    for columns in (PART_COLUMNS, TOTAL_COLUMNS):
        names = [column.name for column in columns]
        assert len(set(names)) == len(names)
        assert all(column.meaning.endswith(".") for column in columns)
        assert all(column.better in ("lower", "higher", "") for column in columns)
