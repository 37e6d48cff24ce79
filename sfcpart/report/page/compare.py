"""The page of a comparison: every way to split as quality against time, and side by side."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.comparison import COMPARED_COLUMNS
from sfcpart.report.numbers import amount, duration, number, percent, seconds
from sfcpart.report.page.content import (
    Axis,
    Chart,
    ColumnHead,
    Figure,
    Form,
    Page,
    Series,
    TablePlot,
)
from sfcpart.report.page.parts_table import column_head
from sfcpart.report.page.split import model_notes
from sfcpart.report.verdict import judge_comparison

if TYPE_CHECKING:
    from sfcpart.comparison import Comparison

__all__ = ["compare_page"]

_SHOWN = frozenset(
    {"imbalance", "cut_faces", "cut_faces_ratio", "halo_cells", "neighbours_max", "n_split_parts"}
    | {"surface_ratio_mean", "step_seconds", "efficiency", "split_seconds", "peak_bytes"}
    | {"run_seconds"}
)
_QUALITY: tuple[tuple[str, str, str, Form], ...] = (
    ("step_seconds", "Predicted step against time to split", "predicted step", "seconds"),
    ("cut_faces", "Faces cut against time to split", "faces cut", "whole"),
)


def compare_page(comparison: Comparison, *, title: str = "", n_cells: int | None = None) -> Page:
    """Make the page of a comparison.

    Parameters
    ----------
    comparison : Comparison
    title : str
        Such as the name of the mesh.
    n_cells : int, optional
        Of the mesh, for the line below the title.

    Returns
    -------
    Page
    """
    told = comparison.to_json_dict()
    rows = told["rows"]
    n_parts = next((row["n_parts"] for row in rows if row["n_parts"] is not None), None)
    of = f"{n_cells:,} cells in " if n_cells is not None else ""
    return Page(
        title=title or "Ways to split",
        subtitle=f"{of}{number(n_parts)} parts, split in {len(rows)} ways",
        verdict=judge_comparison(comparison),
        figures=_best_figures(comparison),
        sections=[*_charts(rows), _table(rows)],
        notes=_notes(comparison),
        summary={key: value for key, value in told.items() if key != "rows"},
    )


def _best_figures(comparison: Comparison) -> list[Figure]:
    """Return the best of the figures that decide, and who reaches it."""
    rows, best = list(comparison.figures()), comparison.best()
    wanted: list[tuple[str, str, Any]] = [
        ("run_seconds", "Shortest run", duration),
        ("step_seconds", "Shortest step", seconds),
        ("cut_faces", "Fewest faces cut", number),
        ("halo_cells", "Smallest halo", number),
        ("imbalance", "Least imbalance", percent),
        ("split_seconds", "Quickest split", seconds),
        ("peak_bytes", "Least memory", amount),
    ]
    figures = []
    for key, title, write in wanted:
        if key in best:
            value = rows[best[key][0]][key]
            note = ", ".join(rows[k]["name"] for k in best[key])
            figures.append(Figure(key, title, value, write(value), note))
    return figures


def _charts(rows: list[dict[str, Any]]) -> list[Chart]:
    """Show quality against time for each measure of quality that is known."""
    charts = []
    for key, title, label, form in _QUALITY:
        known = [row for row in rows if row["split_seconds"] and row[key] is not None]
        if not known:
            continue
        values = [row[key] for row in known]
        charts.append(
            Chart(
                title,
                "Low and to the left is best: dots that have no other both below and to their left "
                "are worth a thought.",
                x=Axis("time to split", "log", form="seconds"),
                y=Axis(label, form=form),
                series=[
                    Series(
                        "ways to split",
                        "dot",
                        np.array([row["split_seconds"] for row in known]),
                        np.array(values, float),
                        [str(row["name"]) for row in known],
                        named=True,
                    )
                ],
                summary=f"Dots of {len(known)} ways to split; the table below holds the numbers.",
                height=300,
            )
        )
    return charts


def _table(rows: list[dict[str, Any]]) -> TablePlot:
    """Put all known figures side by side."""
    known = [c for c in COMPARED_COLUMNS if any(row[c.name] is not None for row in rows)]
    heads = [ColumnHead("name", "method", form="text")]
    heads += [column_head(column, shown=column.name in _SHOWN) for column in known]
    if any(row["failure"] for row in rows):
        heads.append(ColumnHead("failure", "why there is none", form="text"))
    return TablePlot(
        "Side by side",
        "All figures of each way to split; hover over a heading for what it means.",
        name="rows",
        columns=heads,
        rows={head.key: [row[head.key] for row in rows] for head in heads},
    )


def _notes(comparison: Comparison) -> list[tuple[str, str]]:
    """Write down what is behind the times."""
    notes = [
        (
            "times",
            "compilation left out; the cell graph"
            f" ({seconds(comparison.graph_seconds)}) counts for methods that need it",
        ),
        ("run", f"{comparison.steps:,} predicted steps and the split"),
    ]
    assessed = [row.assessment for row in comparison.rows if row.assessment is not None]
    return notes + (model_notes(assessed[0]) if assessed else [])
