"""What a report page holds, as values: figures, charts, matrices, tables, a view in space.

A page is made of these by whoever knows the matter (`sfcpart.report.page.split` and its siblings)
and written by `sfcpart.report.page.write_page`. A new kind of report needs no new template.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any, Literal, TypeAlias

from numpy.typing import ArrayLike

__all__ = [
    "Axis",
    "Chart",
    "ColumnHead",
    "Figure",
    "Form",
    "MatrixPlot",
    "Page",
    "Section",
    "Series",
    "TablePlot",
    "ViewPlot",
]

Mark: TypeAlias = Literal["line", "dot", "bar", "tick", "step", "rule"]
Form: TypeAlias = Literal[
    "whole", "ratio", "percent", "seconds", "duration", "bytes", "plain", "text"
]
"""How numbers are written."""


@dataclass(frozen=True)
class Figure:
    """One number of note.

    Attributes
    ----------
    key : str
        Its name in `summary.json`.
    title : str
    value : number or None
        As in `summary.json`.
    text : str
        The number as people read it, with its unit.
    note : str
        The bound it is held against, or what it is made of.
    """

    key: str
    title: str
    value: float | int | None
    text: str
    note: str = ""


@dataclass(frozen=True)
class Axis:
    """An axis of a chart: label with the unit, linear or logarithmic, and the least span shown.

    `form` says how numbers are written; `least` and `most` are always within what is shown.
    """

    label: str
    kind: Literal["linear", "log"] = "linear"
    form: Form = "plain"
    least: float | None = None
    most: float | None = None


@dataclass(frozen=True, eq=False)
class Series:
    """Points of one chart that belong together, in one mark.

    A "rule" has one y and goes across; a "tick" is a short line; "step" keeps its y to the next x.
    `label` names points: shown when pointed at, and beside dots if `named`.
    Series with a `facet` stand in strips of their own, one for each facet.
    """

    name: str
    mark: Mark
    x: ArrayLike
    y: ArrayLike
    label: Sequence[str] = ()
    colour: int = 0
    named: bool = False
    facet: str = ""


@dataclass(frozen=True, eq=False)
class Chart:
    """A chart; `summary` says in words what it shows, for those who do not see it."""

    title: str
    lead: str
    x: Axis
    y: Axis
    series: Sequence[Series]
    summary: str = ""
    height: int = 260
    kind: str = "chart"


@dataclass(frozen=True, eq=False)
class MatrixPlot:
    """A square sparse matrix to zoom into: row r, column c hold each of the values.

    Attributes
    ----------
    size : int
        Rows and columns.
    row, column : (n,) integers
    value : mapping of str to (n,) integers
        What may be shown, by title with the unit; the first one is shown first.
    row_word, column_word : str
        What a row and a column stand for.
    block : int
        How many parts each row and column stand for (more than one where there are very many).
    link : str
        Word between row and column where one is told.
    """

    title: str
    lead: str
    size: int
    row: ArrayLike
    column: ArrayLike
    value: Mapping[str, ArrayLike]
    row_word: str = "part"
    column_word: str = "part"
    block: int = 1
    link: str = "and"
    kind: str = "matrix"


@dataclass(frozen=True)
class ColumnHead:
    """A column of a table: key (of JSON and CSV), heading, unit, meaning, and how it is written."""

    key: str
    title: str
    unit: str = ""
    meaning: str = ""
    form: Form = "plain"
    shown: bool = True


@dataclass(frozen=True, eq=False)
class TablePlot:
    """A table to sort, search and copy; `name` gives the columns their place in the page's JSON."""

    title: str
    lead: str
    name: str
    columns: Sequence[ColumnHead]
    rows: Mapping[str, Sequence[Any]]
    sort: str = ""
    kind: str = "table"


@dataclass(frozen=True, eq=False)
class ViewPlot:
    """Parts in space: packed triangles, how to colour them, and a picture where nothing is drawn.

    Attributes
    ----------
    scene : mapping
        As `sfcpart.report.page.scene.pack_scene` makes it.
    values : mapping of str to (n_parts,) numbers
        What parts may be coloured by, by title; `levels` the same for whole numbers.
    picture : str
        A data URL.
    described : str
        The picture in words.
    """

    title: str
    lead: str
    scene: Mapping[str, Any]
    values: Mapping[str, ArrayLike]
    levels: Mapping[str, ArrayLike]
    picture: str
    described: str
    note: str = ""
    kind: str = "view"


Section: TypeAlias = Chart | MatrixPlot | TablePlot | ViewPlot


@dataclass(frozen=True, eq=False)
class Page:
    """A whole page.

    Attributes
    ----------
    title, subtitle : str
    verdict : sequence of str
        Two sentences.
    figures : sequence of Figure
    sections : sequence of Section
    notes : sequence of (str, str)
        How it was made: names and texts.
    summary : mapping
        The figures as in `summary.json`; stands in the page as JSON under the same keys.
    """

    title: str
    subtitle: str
    verdict: Sequence[str]
    figures: Sequence[Figure] = ()
    sections: Sequence[Section] = ()
    notes: Sequence[tuple[str, str]] = ()
    summary: Mapping[str, Any] = field(default_factory=dict)
