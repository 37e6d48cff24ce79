"""The page of a replayed run: imbalance over time, when each rule re-splits, what it costs."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.report.numbers import counted, duration, number, percent
from sfcpart.report.page.content import Axis, Chart, ColumnHead, Figure, Page, Series, TablePlot
from sfcpart.report.page.split import CAUTION
from sfcpart.report.verdict import judge_replay

if TYPE_CHECKING:
    from sfcpart.resplit.replayed import Replay

__all__ = ["replay_page"]

_COLUMNS = (
    ColumnHead("rule", "rule", form="text"),
    ColumnHead("seconds", "run", "s", "Predicted time of the run.", "duration"),
    ColumnHead("step_seconds", "in steps", "s", "What of it are steps.", "duration"),
    ColumnHead("resplit_seconds", "in re-splits", "s", "What of it are re-splits.", "duration"),
    ColumnHead("n_resplits", "re-splits", "times", "How often it re-split.", "whole"),
    ColumnHead("moved_bytes", "moved", "bytes", "What moved in all.", "bytes"),
    ColumnHead("mean_imbalance", "imbalance", "", "Mean over frames.", "percent"),
    ColumnHead("largest_imbalance", "most", "", "Largest imbalance of a frame.", "percent"),
    ColumnHead("regret", "regret", "", "Time over that of hindsight, less 1.", "percent"),
    ColumnHead("period", "period", "frames", "The best one, for best-period.", "whole"),
)


def replay_page(found: Replay, *, title: str = "") -> Page:
    """Make the page of a replayed run.

    Parameters
    ----------
    found : Replay
    title : str
        Such as the name of the series.

    Returns
    -------
    Page
    """
    table = found.timetable
    rows = list(found.figures())
    cells = counted(int(table.n_cells.max()), "cell")
    return Page(
        title=title or "A run replayed",
        subtitle=f"{counted(table.n_frames, 'frame')}, {counted(int(table.steps.sum()), 'step')}, "
        f"up to {cells}, {counted(table.n_parts, 'part')}",
        verdict=judge_replay(found),
        figures=_figures(found, rows),
        sections=[
            _over_time(found),
            _price(rows),
            TablePlot(
                "Rules",
                "The predicted run under each rule.",
                name="rules",
                columns=_COLUMNS,
                rows={head.key: [row[head.key] for row in rows] for head in _COLUMNS},
            ),
        ],
        notes=[
            (
                "times",
                "predicted by the model of a step; the first split, which all rules share, is left "
                "out; rules decide between frames",
            ),
            ("caution", CAUTION),
        ],
        summary={key: value for key, value in found.to_json_dict().items() if key != "rules"},
    )


def _figures(found: Replay, rows: list[dict[str, Any]]) -> list[Figure]:
    """Return the best rule and the ends it is held against."""
    figures = [
        Figure("seconds", row["rule"], row["seconds"], duration(row["seconds"]), _regret(row))
        for row in sorted(rows, key=lambda row: row["seconds"])[:4]
    ]
    even = found.balanced_seconds
    note = "were every step as short as its mean rank"
    return [*figures, Figure("balanced_seconds", "Never reached", even, duration(even), note)]


def _regret(row: dict[str, Any]) -> str:
    """Say how much longer a run takes than the best one."""
    over = f"{percent(row['regret'])} over hindsight" if row["regret"] else "as short as there is"
    return f"{over}; {counted(row['n_resplits'], 're-split')}"


def _over_time(found: Replay) -> Chart:
    """Show the imbalance of each rule frame by frame, and where it re-splits."""
    start = np.concatenate(([0], np.cumsum(found.timetable.steps)))
    series = []
    for outcome in found.outcomes:
        again = np.array(outcome.path.resplits, np.int64)
        lasting = np.append(outcome.path.imbalance, outcome.path.imbalance[-1:])
        series.append(Series("imbalance", "step", start, lasting, facet=outcome.rule))
        dots = outcome.path.imbalance[again]
        series.append(Series("re-split", "dot", start[again], dots, facet=outcome.rule, colour=1))
    return Chart(
        "Imbalance over time",
        "A strip for each rule; dots where it re-splits (at the imbalance left after it).",
        x=Axis("steps", least=0),
        y=Axis("imbalance", form="percent", least=0),
        series=series,
        summary="The table of rules holds mean and largest imbalance and the number of re-splits.",
        height=60 + 90 * len(found.outcomes),
    )


def _price(rows: list[dict[str, Any]]) -> Chart:
    """Show the time of the run against the number of re-splits; rules that agree share a dot."""
    names: dict[tuple[int, float], list[str]] = {}
    for row in rows:
        place = row["n_resplits"], float(f"{row['seconds']:.3g}")
        names.setdefault(place, []).append(row["rule"])
    return Chart(
        "Time of the run against re-splits",
        "Too few re-splits wait for the slowest part, too many pay for moving.",
        x=Axis("re-splits", least=0),
        y=Axis("predicted time", form="duration"),
        series=[
            Series(
                "rules",
                "dot",
                [place[0] for place in names],
                [place[1] for place in names],
                [", ".join(agreed) for agreed in names.values()],
                named=True,
            )
        ],
        summary=f"Dots of {number(len(rows))} rules.",
        height=300,
    )
