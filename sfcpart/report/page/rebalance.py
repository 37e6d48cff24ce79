"""The page of a re-split: does it pay, who sends how much to whom, and after how many steps."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.report.numbers import amount, counted, number, percent, seconds
from sfcpart.report.page.content import Axis, Chart, Figure, MatrixPlot, Page, Section, Series
from sfcpart.report.verdict import judge_rebalance

if TYPE_CHECKING:
    from sfcpart.resplit.result import Rebalance

__all__ = ["break_even_chart", "migration_matrix", "rebalance_page"]

_FAR = 1.6  # the chart ends this much beyond the break-even


def rebalance_page(page: Page, result: Rebalance) -> Page:
    """Turn the page of the new split into that of the re-split.

    Parameters
    ----------
    page : Page
        Of `result.partition` and `result.after` (`split_page`).
    result : Rebalance

    Returns
    -------
    Page
        With the verdict on the re-split first, its figures before those of the new split, the
        migration matrix and the break-even curve.
    """
    view, *rest = page.sections
    chart = break_even_chart(result)
    own: list[Section] = [migration_matrix(result)]
    own += [] if chart is None else [chart]
    return replace(
        page,
        subtitle=f"{page.subtitle}, split again by {result.way}",
        verdict=judge_rebalance(result),
        figures=[*_figures(result), *page.figures],
        sections=[view, *own, *rest],
        summary={**page.summary, "rebalance": result.to_json_dict()},
    )


def _figures(result: Rebalance) -> list[Figure]:
    """Return what the re-split costs and saves."""
    moved, verdict = result.migration, result.verdict
    least = "nothing has to move"
    if moved.times_least is not None:
        least = f"{number(moved.times_least)} times the least possible"
    told = [
        Figure(
            "moved_share", "Work that moves", moved.moved_share, percent(moved.moved_share), least
        ),
        Figure(
            "moved_bytes",
            "Moved",
            moved.moved_bytes,
            amount(moved.moved_bytes),
            f"{counted(moved.moved_cells, 'cell')} in {counted(moved.messages, 'message')}",
        ),
        Figure(
            "move_seconds",
            "Time to move",
            verdict.move_seconds,
            seconds(verdict.move_seconds),
            f"predicted; splitting took {seconds(verdict.split_seconds)}",
        ),
    ]
    if verdict.step_before is not None and verdict.step_after is not None:
        steps = verdict.break_even
        told.append(
            Figure(
                "break_even_steps",
                "Pays back after",
                steps,
                "never" if steps is None else counted(steps, "step"),
                f"a step takes {seconds(verdict.step_before)} before, "
                f"{seconds(verdict.step_after)} after",
            )
        )
    return told


def migration_matrix(result: Rebalance) -> MatrixPlot:
    """Show the cells and the weight that each old part sends to each new one."""
    moved = result.migration.overlap
    moves = moved.old != moved.new
    size = max(moved.n_old_parts, moved.n_parts)
    old, new = moved.old[moves], moved.new[moves]
    return MatrixPlot(
        "Who sends cells to whom",
        "A mark where cells of the old part of the row move to the new part of the column: one "
        "message, once. What stays is left out.",
        size=size,
        row=old,
        column=new,
        value={
            "cells": moved.cells[moves],
            "weight": moved.weight[moves] * result.migration.unit,
        },
        row_word="old part",
        column_word="new part",
        link="to",
    )


def break_even_chart(result: Rebalance) -> Chart | None:
    """Show what each way has saved after so many steps; None where steps are unknown."""
    before = result.verdict.step_before
    known: list[Any] = [trial for trial in result.trials if trial.step_seconds is not None]
    if before is None or not known:
        return None
    lines = [(trial.name, before - trial.step_seconds, _cost(trial)) for trial in known]
    last = float(max(result.verdict.steps, _FAR * (result.verdict.break_even or 0)))
    steps = np.array([0.0, last])
    series = [
        Series(name, "line", steps, steps * saved - cost, [name, name], colour=k)
        for k, (name, saved, cost) in enumerate(lines)
    ]
    series.append(Series("no gain, no loss", "rule", [0], [0.0], colour=6))
    even = result.verdict.break_even
    words = "never pays back" if even is None else f"pays back after {counted(even, 'step')}"
    return Chart(
        "After how many steps it pays",
        "Time saved by faster steps, less the time for splitting (measured) and moving "
        f"(predicted). The split is looked at again after {counted(result.verdict.steps, 'step')}.",
        x=Axis("steps since the re-split", least=0),
        y=Axis("time saved", form="seconds"),
        series=series,
        summary=f"Lines of {counted(len(lines), 'way')} to re-split; {result.way} {words}.",
    )


def _cost(trial: Any) -> float:
    """Return the seconds that a way to re-split takes once."""
    move = 0.0 if trial.migration is None else float(trial.migration.seconds)
    return float(trial.split_seconds) + move
