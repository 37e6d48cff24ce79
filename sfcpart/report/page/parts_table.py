"""The table of parts, with the keys of `parts.csv`; of very many parts the slowest."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from sfcpart.measure.columns import PART_COLUMNS, Column
from sfcpart.report.page.content import ColumnHead, Form, TablePlot

if TYPE_CHECKING:
    from sfcpart.measure.assessment import Assessment

__all__ = ["MOST_PARTS", "column_head", "parts_table"]

MOST_PARTS = 5_000
_SHOWN = frozenset(
    {"part", "cells", "weight", "load", "load_unweighted", "limit_share", "cut_faces"}
    | {"halo_cells", "neighbours", "smallest_interface", "pieces", "surface_ratio", "step_seconds"}
)
_SHARES = frozenset(
    {"limit_share", "imbalance", "imbalance_unweighted", "cut_share", "halo_share"}
    | {"exchange_share", "efficiency"}
)


def parts_table(assessment: Assessment) -> TablePlot:
    """Return every known figure of each part."""
    known = [c for c in PART_COLUMNS if assessment.part[c.name] is not None]
    rows = assessment.to_json_dict()["part"]
    assert isinstance(rows, dict)
    n_parts, lead = assessment.n_parts, "All figures of each part, the slowest first."
    if n_parts > MOST_PARTS:
        slow = _slowest(assessment)
        rows = {name: [values[k] for k in slow] for name, values in rows.items()}
        lead = f"The {MOST_PARTS:,} slowest of {n_parts:,} parts; parts.csv holds all."
    by_step = assessment.part["step_seconds"] is not None
    return TablePlot(
        "Parts",
        lead,
        name="part",
        columns=[column_head(column, shown=column.name in _SHOWN) for column in known],
        rows={column.name: rows[column.name] for column in known},
        sort="step_seconds" if by_step else "load",
    )


def column_head(column: Column, *, shown: bool = True) -> ColumnHead:
    """Turn a figure into a column of a table."""
    return ColumnHead(
        column.name, column.title, column.unit, column.meaning, form=_form(column), shown=shown
    )


def _form(column: Column) -> Form:
    """Choose how a figure is written."""
    if column.is_whole:
        return "whole"
    if column.name in _SHARES:
        return "percent"
    if column.unit in ("s", "bytes"):
        return "seconds" if column.unit == "s" else "bytes"
    return "ratio" if column.name.startswith("load") else "plain"


def _slowest(assessment: Assessment) -> list[int]:
    """Pick the parts that hold the others up, in the order of their numbers."""
    step = assessment.part["step_seconds"]
    slow = np.asarray(assessment.part["load"] if step is None else step)
    chosen: list[int] = sorted(np.argsort(-slow, kind="stable")[:MOST_PARTS].tolist())
    return chosen
