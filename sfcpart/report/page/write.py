"""Write a page: one HTML file that asks for nothing else, made from a jinja2 template.

Text goes through the template's escaping; data through its JSON filter, which leaves no character
that could end a script element. A content security policy in the page forbids every request.
"""

from __future__ import annotations

from base64 import b64encode
from functools import cache, lru_cache
from importlib.resources import files
from math import isfinite
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart import __version__
from sfcpart.errors import FileError
from sfcpart.report.page.content import Chart, MatrixPlot, Page, Section, TablePlot, ViewPlot

if TYPE_CHECKING:
    from jinja2 import Environment

__all__ = ["render_page", "write_page"]

_ROOM = "sfcpart.report.page"
_SCRIPTS = ("common.js", "charts.js", "matrix.js", "table.js", "view.js", "start.js")
_DIGITS = 7  # of positions in charts; figures are given in full


def write_page(path: str | PathLike[str], page: Page) -> None:
    """Write a page as one HTML file.

    Parameters
    ----------
    path : path
        The file, replaced if it exists.
    page : Page

    Raises
    ------
    FileError
        If it cannot be written.

    Examples
    --------
    >>> import tempfile
    >>> from pathlib import Path
    >>> with tempfile.TemporaryDirectory() as place:
    ...     write_page(f"{place}/report.html", Page("Channel", "8 parts", ["Good.", "Cheap."]))
    ...     Path(place, "report.html").read_text().splitlines()[0]
    '<!doctype html>'
    """
    try:
        Path(path).write_text(render_page(page), encoding="utf-8", errors="replace")
    except OSError as error:
        raise FileError(f"{Path(path)}: cannot be written: {error.strerror or error}") from error


def render_page(page: Page) -> str:
    """Return the page as text.

    Parameters
    ----------
    page : Page

    Returns
    -------
    str

    Examples
    --------
    >>> "&lt;b&gt;" in render_page(Page("<b>", "", []))
    True
    """
    kinds = {section.kind for section in page.sections}
    scripts = [_text(f"scripts/{name}") for name in _SCRIPTS]
    libraries = ["libraries/charts.min.js"] if kinds & {"chart", "matrix", "view"} else []
    libraries += ["libraries/drawing.min.js"] if "view" in kinds else []
    return (
        _templates()
        .get_template("page.html")
        .render(
            page=page,
            data={
                "summary": page.summary,
                "sections": [_plain_section(section) for section in page.sections],
            },
            style=_text("style.css"),
            libraries=[_text(name) for name in libraries],
            scripts=scripts,
            version=__version__,
        )
    )


@lru_cache(maxsize=1)
def _templates() -> Environment:
    """Make the template environment: everything is escaped, what is missing is an error."""
    from jinja2 import Environment, PackageLoader, StrictUndefined

    environment = Environment(
        loader=PackageLoader("sfcpart.report", "page/templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.policies["json.dumps_kwargs"] = {
        "allow_nan": False,
        "separators": (",", ":"),
        "sort_keys": False,
    }
    return environment


@cache
def _text(name: str) -> str:
    """Read a file that ships with the page."""
    return files(_ROOM).joinpath(name).read_text(encoding="utf-8")


def _plain_section(section: Section) -> dict[str, Any]:
    """Return a section as plain values."""
    if isinstance(section, Chart):
        return _plain_chart(section)
    if isinstance(section, MatrixPlot):
        return _plain_matrix(section)
    if isinstance(section, TablePlot):
        return _plain_table(section)
    return _plain_view(section)


def _plain_chart(chart: Chart) -> dict[str, Any]:
    """Return axes and series."""
    return {
        "kind": chart.kind,
        "title": chart.title,
        "height": chart.height,
        "x": vars(chart.x),
        "y": vars(chart.y),
        "series": [
            {
                "name": series.name,
                "mark": series.mark,
                "x": _numbers(series.x, _DIGITS),
                "y": _numbers(series.y, _DIGITS),
                "label": list(series.label),
                "colour": series.colour,
                "named": series.named,
                "facet": series.facet,
            }
            for series in chart.series
        ],
    }


def _plain_matrix(matrix: MatrixPlot) -> dict[str, Any]:
    """Return the entries as bytes."""
    return {
        "kind": matrix.kind,
        "title": matrix.title,
        "size": matrix.size,
        "block": matrix.block,
        "rowWord": matrix.row_word,
        "columnWord": matrix.column_word,
        "link": matrix.link,
        "row": _bytes(matrix.row),
        "column": _bytes(matrix.column),
        "value": {name: _bytes(values, "<f8") for name, values in matrix.value.items()},
    }


def _plain_table(table: TablePlot) -> dict[str, Any]:
    """Return heads and columns."""
    return {
        "kind": table.kind,
        "title": table.title,
        "name": table.name,
        "sort": table.sort,
        "columns": [vars(column) for column in table.columns],
        "rows": table.rows,
    }


def _plain_view(view: ViewPlot) -> dict[str, Any]:
    """Return the scene and what parts may be coloured by."""
    return {
        "kind": view.kind,
        "title": view.title,
        "scene": view.scene,
        "values": {name: _numbers(values, _DIGITS) for name, values in view.values.items()},
        "levels": {name: _numbers(values) for name, values in view.levels.items()},
    }


def _numbers(values: ArrayLike, digits: int | None = None) -> list[float | int | None]:
    """Return numbers with so many digits, None where there is none."""
    plain = np.asarray(values).tolist()
    if digits is None:
        return [value if isfinite(value) else None for value in plain]
    return [float(f"{value:.{digits}g}") if isfinite(value) else None for value in plain]


def _bytes(values: ArrayLike, dtype: str = "<i4") -> str:
    """Return numbers as base64."""
    return b64encode(np.asarray(values).astype(dtype).tobytes()).decode("ascii")
