"""The page of a forecast: step time, efficiency and memory against the number of parts."""

from __future__ import annotations

from dataclasses import asdict
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.report.numbers import amount, counted, number, percent, seconds
from sfcpart.report.page.content import Axis, Chart, Figure, Page, Series, TablePlot
from sfcpart.report.page.parts_table import column_head
from sfcpart.report.page.split import CAUTION, step_model_notes
from sfcpart.report.verdict import judge_forecast
from sfcpart.scaling import FORECAST_COLUMNS

if TYPE_CHECKING:
    from sfcpart.scaling import Forecast

__all__ = ["forecast_page"]


def forecast_page(found: Forecast, *, title: str = "") -> Page:
    """Make the page of a forecast.

    Parameters
    ----------
    found : Forecast
    title : str
        Such as the name of the mesh.

    Returns
    -------
    Page
    """
    rows = list(found.figures())
    first, last = rows[0]["n_parts"], rows[-1]["n_parts"]
    return Page(
        title=title or "Forecast",
        subtitle=f"{counted(found.n_cells, 'cell')}, {number(first)} to {counted(last, 'part')}",
        verdict=judge_forecast(found),
        figures=_figures(found),
        sections=[_speed(rows), _efficiency(found, rows), _weak(found), _step(rows), _table(rows)],
        notes=[
            *step_model_notes(found.step_model),
            ("memory", f"{amount(found.memory_a_cell)} a cell, halo cells included"),
            ("caution", CAUTION),
        ],
        summary={key: value for key, value in found.to_json_dict().items() if key != "rungs"},
    )


def _figures(found: Forecast) -> list[Figure]:
    """Return the figures of the count that keeps the efficiency wished for."""
    keeps = f"keeps {percent(found.keep)}"
    best = [rung for rung in found.rungs if rung.n_parts == found.best]
    if not best:
        return [Figure("best", "Largest count", None, "none", keeps)]
    rung = best[0]
    return [
        Figure("best", "Largest count", found.best, number(found.best), keeps),
        Figure(
            "step_seconds", "Step there", rung.step_seconds, seconds(rung.step_seconds), "model"
        ),
        Figure(
            "efficiency",
            "Efficiency there",
            rung.efficiency,
            percent(rung.efficiency),
            f"speed-up {number(rung.speed_up)}",
        ),
        Figure(
            "halo_share",
            "Halo there",
            rung.halo_share,
            percent(rung.halo_share),
            "halo cells over cells",
        ),
        Figure(
            "memory_bytes",
            "Memory a part",
            rung.memory_bytes,
            amount(rung.memory_bytes),
            f"of the fullest; at most {counted(rung.cells_max, 'cell')} of its own",
        ),
    ]


def _column(rows: list[dict[str, Any]], key: str) -> np.ndarray:
    """Return a column of figures."""
    return np.array([row[key] for row in rows], np.float64)


def _speed(rows: list[dict[str, Any]]) -> Chart:
    """Show strong scaling."""
    parts = _column(rows, "n_parts")
    return Chart(
        "Strong scaling",
        "Speed-up over one rank on this mesh, against as many ranks without messages and waiting.",
        x=Axis("parts, one a rank", "log", form="whole"),
        y=Axis("speed-up", "log"),
        series=[
            Series("perfect", "line", parts, parts, colour=6),
            Series("predicted", "line", parts, _column(rows, "speed_up")),
        ],
        summary="The table of counts holds the numbers.",
    )


def _efficiency(found: Forecast, rows: list[dict[str, Any]]) -> Chart:
    """Show efficiency and share of messages."""
    parts = _column(rows, "n_parts")
    return Chart(
        "Efficiency",
        "Share of their time that ranks spend on work, and what the slowest spends on messages.",
        x=Axis("parts, one a rank", "log", form="whole"),
        y=Axis("share", form="percent", least=0.0, most=1.0),
        series=[
            Series("efficiency", "line", parts, _column(rows, "efficiency")),
            Series("messages", "line", parts, _column(rows, "exchange_share"), colour=1),
            Series("wished for", "rule", [parts[0]], [found.keep], colour=2),
        ],
        summary=f"Wished for: {percent(found.keep)}. The table of counts holds the numbers.",
    )


def _weak(found: Forecast) -> Chart:
    """Show weak scaling."""
    rungs = [asdict(rung) for rung in found.weak]
    return Chart(
        "Weak scaling",
        f"Meshes that grow with the ranks, about {number(found.cells_a_part)} cells a part: the "
        "first parts along the curve, as if there were no others.",
        x=Axis("parts, one a rank", "log", form="whole"),
        y=Axis("efficiency", form="percent", least=0.0, most=1.0),
        series=[
            Series("efficiency", "line", _column(rungs, "n_parts"), _column(rungs, "efficiency"))
        ],
        summary=f"From one part to {counted(rungs[-1]['n_parts'], 'part')} the efficiency goes to "
        f"{percent(rungs[-1]['efficiency'])}.",
        height=220,
    )


def _step(rows: list[dict[str, Any]]) -> Chart:
    """Show the time of a step."""
    return Chart(
        "Time of a step",
        "Where the line lies flat, more ranks buy nothing.",
        x=Axis("parts, one a rank", "log", form="whole"),
        y=Axis("predicted step", "log", form="seconds"),
        series=[Series("step", "line", _column(rows, "n_parts"), _column(rows, "step_seconds"))],
        summary="The table of counts holds the numbers.",
        height=220,
    )


def _table(rows: list[dict[str, Any]]) -> TablePlot:
    """Put all figures of all counts into a table."""
    return TablePlot(
        "Counts",
        "All figures of each count of parts.",
        name="rungs",
        columns=[column_head(column) for column in FORECAST_COLUMNS],
        rows={column.name: [row[column.name] for row in rows] for column in FORECAST_COLUMNS},
    )
