"""Who talks to whom: the matrix of parts that meet, and how many neighbours parts have."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from sfcpart.report.numbers import number
from sfcpart.report.page.content import Axis, Chart, MatrixPlot, Section, Series

if TYPE_CHECKING:
    from sfcpart.measure.assessment import Assessment
    from sfcpart.measure.pairs import PartPairs

__all__ = ["MOST_ROWS", "meeting_sections"]

MOST_ROWS = 4_096


def meeting_sections(assessment: Assessment) -> list[Section]:
    """Return the matrix and the count of neighbours; nothing where faces are not known."""
    if assessment.pairs is None:
        return []
    return [_matrix(assessment.pairs, assessment.n_parts), _counts(assessment)]


def _matrix(pairs: PartPairs, n_parts: int) -> MatrixPlot:
    """Show what two parts share; of very many parts, blocks of them in the order of numbers."""
    block = -(-n_parts // MOST_ROWS)
    size = -(-n_parts // block)
    key = (pairs.part.astype(np.int64) // block) * size + pairs.neighbour.astype(np.int64) // block
    cells, place = np.unique(key, return_inverse=True)
    values = {
        "faces between them": _sums(place, pairs.faces, len(cells)),
        "cells sent, row to column": _sums(place, pairs.sent_cells, len(cells)),
    }
    joined = f" Each row stands for {block:,} parts in the order of their numbers." * (block > 1)
    return MatrixPlot(
        "Who talks to whom",
        "A mark where the part of the row and the part of the column share faces: one message each "
        "way in every exchange. The nearer to the diagonal, the nearer the numbers of the parts, "
        "and so, as a rule, their ranks." + joined,
        size=size,
        row=cells // size,
        column=cells % size,
        value=values,
        block=block,
    )


def _sums(place: np.ndarray, values: np.ndarray, count: int) -> np.ndarray:
    """Add whole numbers that fall in the same place."""
    sums: np.ndarray = np.rint(np.bincount(place, values, count)).astype(np.int64)
    return sums


def _counts(assessment: Assessment) -> Chart:
    """Show how many parts have how many neighbours."""
    neighbours = np.asarray(assessment.part["neighbours"])
    count = np.bincount(neighbours)
    there = np.flatnonzero(count)
    total = assessment.total
    parts = [f"{number(int(count[k]))} parts with {k} neighbours" for k in there.tolist()]
    return Chart(
        "Neighbours of each part",
        "Every neighbour costs the latency of a message in each exchange, however little it says.",
        x=Axis("neighbours", least=0),
        y=Axis("parts", least=0),
        series=[Series("parts", "bar", there, count[there], parts)],
        summary=f"On average {number(total['neighbours_mean'])} neighbours, at most "
        f"{number(total['neighbours_max'])}.",
        height=180,
    )
