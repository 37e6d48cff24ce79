"""The verdict on a partition in two sentences: may it run, and what will it cost.

The same two stand in the report page and on the screen. What counts as balanced is common practice
(a few per cent), no source; what no split can avoid is never held against this one.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from sfcpart.report.numbers import counted, duration, number, percent, seconds

if TYPE_CHECKING:
    from sfcpart.comparison import Comparison
    from sfcpart.measure.assessment import Assessment
    from sfcpart.resplit.replayed import Replay
    from sfcpart.resplit.result import Rebalance
    from sfcpart.scaling import Forecast, Rung

__all__ = [
    "counted_parts",
    "judge",
    "judge_comparison",
    "judge_forecast",
    "judge_rebalance",
    "judge_replay",
    "listed",
]

FAIR = 0.05
"""Imbalance up to which work counts as evenly shared."""
NEAR = 1.1
"""Loads up to this multiple of the least possible one count as the best there is."""


def judge(assessment: Assessment) -> tuple[str, str]:
    """Say in two sentences whether a partition is fit to run, and what it costs.

    Parameters
    ----------
    assessment : Assessment

    Returns
    -------
    (str, str)
        Balance and faults that stop a run; cut, pieces and predicted efficiency.
    """
    return _balance(assessment), _cost(assessment)


def listed(parts: Sequence[int]) -> str:
    """List parts, the first few if there are many."""
    text = ", ".join(map(str, parts[:10]))
    return text if len(parts) <= 10 else f"{text} and {len(parts) - 10:,} more"


def counted_parts(parts: Sequence[int]) -> str:
    """List parts with their noun: part 3, parts 3, 7."""
    return f"part{'' if len(parts) == 1 else 's'} {listed(parts)}"


def _balance(assessment: Assessment) -> str:
    """Judge the shares of work, and what makes a solver stop."""
    total = assessment.total
    faults = _faults(assessment)
    imbalance, least = total["imbalance"] or 0.0, total["least_imbalance"] or 0.0
    share = f"no part of {number(total['n_parts'])} carries more than its fair share"
    if imbalance > 0:
        share = (
            f"the most loaded of {counted(total['n_parts'], 'part')} carries {percent(imbalance)} "
            f"more than its fair share (no split can do better than {percent(least)})"
        )
    if faults:
        return f"Not fit to run: {' and '.join(faults)}; {share}."
    if imbalance <= FAIR:
        return f"The work is evenly shared: {share}."
    if 1 + imbalance <= NEAR * (1 + least):
        return f"The work is shared about as evenly as its cells allow: {share}."
    return f"The work is unevenly shared: {share}."


def _faults(assessment: Assessment) -> list[str]:
    """Name what stops a run."""
    total = assessment.total
    faults = []
    if total["n_empty_parts"]:
        verb = "is" if total["n_empty_parts"] == 1 else "are"
        parts = listed(assessment.empty_parts.tolist())
        faults.append(f"{counted(total['n_empty_parts'], 'part')} {verb} empty ({parts})")
    if (total["limit_share"] or 0.0) > 1.0:
        faults.append(f"the fullest part holds {percent(total['limit_share'])} of its limit")
    return faults


def _cost(assessment: Assessment) -> str:
    """Say what is cut and what a step makes of it."""
    total = assessment.total
    if total["cut_faces"] is None:
        return "What it cuts is not known: the mesh is given by its cell centres, without faces."
    cut = f"It cuts {number(total['cut_faces'])} of {number(total['n_faces'])} inner faces"
    cut += f" ({percent(total['cut_share'])})" if total["n_faces"] else ""
    pieces = total["n_split_parts"]
    whole = "every part in one piece"
    if pieces:
        whole = f"{counted(pieces, 'part')} in more than one piece"
    model = assessment.step_model.network.name
    step = f"a step is predicted to keep {percent(total['efficiency'])} of the ranks busy"
    return f"{cut} and leaves {whole}; {step} (model, network {model})."


def judge_comparison(comparison: Comparison) -> tuple[str, str]:
    """Say in two sentences which way of splitting serves a run best, and at what price.

    Parameters
    ----------
    comparison : Comparison

    Returns
    -------
    (str, str)
    """
    figures = list(comparison.figures())
    known = [row for row in figures if row["run_seconds"] is not None]
    done = [k for k, row in enumerate(comparison.rows) if not row.failure]
    if not done:
        return "No method could split the mesh as asked.", f"{comparison.rows[0].failure}."
    if not known:
        return _least_uneven([figures[k] for k in done]), "Without faces nothing more is known."
    best = min(known, key=lambda row: row["run_seconds"])
    worst = max(known, key=lambda row: row["run_seconds"])
    gain = 1 - best["run_seconds"] / worst["run_seconds"] if worst["run_seconds"] else 0.0
    first = f"Over {comparison.steps:,} steps {best['name']} is predicted to finish first"
    first += f", {percent(gain)} before {worst['name']}." if worst is not best else "."
    least = min(known, key=lambda row: row["cut_faces"])
    second = f"The fewest faces are cut by {least['name']}, {number(least['cut_faces'])}"
    if least is best:
        return first, f"It also cuts the fewest faces, {number(least['cut_faces'])}."
    return first, f"{second}; {best['name']} cuts {number(best['cut_faces'])}."


def _least_uneven(figures: list[dict[str, float | None]]) -> str:
    """Name the most even split where nothing else is known."""
    best = min(figures, key=lambda row: row["imbalance"] or 0.0)
    return f"{best['name']} is the most even, with an imbalance of {percent(best['imbalance'])}."


def judge_rebalance(result: Rebalance) -> tuple[str, str]:
    """Say in two sentences whether a re-split pays, and what moves.

    Parameters
    ----------
    result : Rebalance

    Returns
    -------
    (str, str)
    """
    moved, after = result.migration, result.after.total
    told = result.verdict.text
    first = f"{told[:1].upper()}{told[1:]}."
    if not moved.moved_cells:
        return first, "No cell moves."
    least = "" if moved.times_least is None else f", {number(moved.times_least)} times the least"
    balance = f"{percent(after['imbalance'])} after"
    if result.before is not None:
        balance = f"{percent(result.before.total['imbalance'])} before, {balance}"
    cells = counted(moved.moved_cells, "cell")
    verb = "moves" if moved.moved_cells == 1 else "move"
    share = f"{percent(moved.moved_share)} of the work{least}"
    return first, f"{cells} {verb} ({share}); imbalance {balance}."


def judge_replay(found: Replay) -> tuple[str, str]:
    """Say in two sentences which rule serves a run best, and what never re-splitting would cost.

    Parameters
    ----------
    found : Replay

    Returns
    -------
    (str, str)
    """
    rows = list(found.figures())
    blind = [row for row in rows if row["rule"] not in ("hindsight", "best-period")] or rows
    best, worst = (pick(blind, key=lambda row: row["seconds"]) for pick in (min, max))
    first = f"Of the rules that do not know the future, {best['rule']} is predicted to be quickest"
    first += f": {duration(best['seconds'])} with {counted(best['n_resplits'], 're-split')}"
    first += f", {percent(best['regret'])} over the best in hindsight."
    longer = worst["seconds"] / best["seconds"] - 1 if best["seconds"] else 0.0
    if worst is best or not longer:
        return first, "No rule differs from another here."
    return first, f"The slowest, {worst['rule']}, takes {percent(longer)} longer."


def judge_forecast(found: Forecast) -> tuple[str, str]:
    """Say in two sentences how far a run will scale, and what stops it.

    Parameters
    ----------
    found : Forecast

    Returns
    -------
    (str, str)
    """
    last, wish = found.rungs[-1], f"an efficiency of {percent(found.keep)}"
    if found.best is None:
        start = f"No count keeps {wish}: {_reached(found.rungs[0])}."
    elif found.best == last.n_parts:
        start = f"Even the largest count keeps {wish}: {_reached(last)}."
    else:
        best = next(rung for rung in found.rungs if rung.n_parts == found.best)
        start = f"Up to {number(found.best)} parts keep {wish}: {_reached(best)}."
    fastest = min(found.rungs, key=lambda rung: rung.step_seconds)
    shortest = f"The shortest step is {seconds(fastest.step_seconds)} on "
    return start, f"{shortest}{counted(fastest.n_parts, 'part')}; {_reached(last)} (model)."


def _reached(rung: Rung) -> str:
    """Say what one count reaches, and on what."""
    share = f"{percent(rung.exchange_share)} of a step are messages"
    return f"{counted(rung.n_parts, 'part')} reach {percent(rung.efficiency)}, {share}"
