"""The table of `sfcpart compare`: the columns that a person needs and that fit the terminal."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import TYPE_CHECKING, Any

from sfcpart.cli.console import console, print_pairs, print_table
from sfcpart.report.numbers import amount, duration, number, percent, seconds

if TYPE_CHECKING:
    from sfcpart.comparison import Comparison

__all__ = ["print_comparison"]


HEADS: dict[str, tuple[str, Callable[[Any], str]]] = {
    "imbalance": ("imbal.", percent),
    "cut_faces": ("cut", number),
    "cut_faces_ratio": ("/least", number),
    "cut_measure_ratio": ("/least", number),
    "halo_cells": ("halo", number),
    "neighbours_max": ("meets", number),
    "n_split_parts": ("broken", number),
    "surface_ratio_mean": ("surface", number),
    "efficiency": ("effic.", percent),
    "split_seconds": ("split", seconds),
    "peak_bytes": ("memory", amount),
    "run_seconds": ("run", duration),
}
"""Heading of each column and how it is written, in table order."""

LEAST_NEEDED = (
    "surface_ratio_mean",
    "efficiency",
    "neighbours_max",
    "cut_measure_ratio",
    "peak_bytes",
    "halo_cells",
    "cut_faces_ratio",
)
"""Columns to leave out where the terminal is narrow, in this order."""


def print_comparison(comparison: Comparison) -> None:
    """Print a row a split, the best figures marked; what failed; what is behind the times."""
    figures = list(comparison.figures())
    shown = [k for k, row in enumerate(comparison.rows) if not row.failure]
    best = comparison.best()
    names = _known([figures[k] for k in shown])
    table = {
        name: [HEADS[name][0]]
        + [_cell(name, figures[k][name], best=k in best.get(name, ())) for k in shown]
        for name in names
    }
    first = ["method", *(comparison.rows[k].name for k in shown)]
    kept = _fitting(first, table)
    columns = [first, *(table[name] for name in kept)]
    if shown:
        heads, *rows = ([column[k] for column in columns] for k in range(len(first)))
        print_table(heads, rows)
    _print_failures(comparison)
    print()
    print_pairs(_explained(comparison, figures, best, left_out=[n for n in names if n not in kept]))


def _known(figures: Sequence[Mapping[str, Any]]) -> list[str]:
    """Return the columns that say something: known figures, one bound, broken parts if any."""
    names = [n for n in HEADS if any(row[n] is not None for row in figures)]
    if "cut_faces_ratio" in names and "cut_measure_ratio" in names:
        names.remove("cut_measure_ratio")
    if not any(row["n_split_parts"] for row in figures) and "n_split_parts" in names:
        names.remove("n_split_parts")
    return names


def _fitting(first: list[str], table: Mapping[str, list[str]]) -> list[str]:
    """Return the columns that fit beside the first one."""
    names = list(table)
    for least in (None, *LEAST_NEEDED):
        names = [name for name in names if name != least]
        widths = [max(map(len, column)) for column in (first, *(table[n] for n in names))]
        if sum(widths) + len(names) <= console().width:
            break
    return names


def _cell(name: str, value: Any, *, best: bool) -> str:
    """Write a figure, with a star if no other is better."""
    return f"{HEADS[name][1](value)}{'*' if best else ' '}"


def _print_failures(comparison: Comparison) -> None:
    """Print which methods gave no split, and why."""
    failed = [(row.name, row.failure) for row in comparison.rows if row.failure]
    if failed:
        print()
        print_pairs(failed)


def _explained(
    comparison: Comparison,
    figures: Sequence[Mapping[str, Any]],
    best: Mapping[str, list[int]],
    *,
    left_out: Sequence[str],
) -> list[tuple[str, str]]:
    """Return what the columns do not say by themselves."""
    said = []
    with_graph = [row["name"] for row in figures if row["graph_seconds"]]
    if with_graph:
        took = seconds(comparison.graph_seconds)
        said.append(("split", f"with {took} for the cell graph: {', '.join(with_graph)}"))
    if any(row["run_seconds"] is not None for row in figures):
        text = f"{comparison.steps:,} predicted steps and the split"
        own = [r.name for r in comparison.rows if not r.failure and r.split_seconds is None]
        said.append(("run", text + (f" (none for {', '.join(own)})" if own else "")))
    if best.get("run_seconds"):
        names = " and ".join(comparison.rows[k].name for k in best["run_seconds"])
        total = duration(figures[best["run_seconds"][0]]["run_seconds"])
        said.append(("shortest", f"predicted run of {comparison.steps:,} steps: {names}, {total}"))
    if left_out:
        heads = ", ".join(dict.fromkeys(HEADS[name][0].strip("/.") for name in left_out))
        said.append(("not shown", f"{heads} and more: --json, --csv FILE"))
    return said
