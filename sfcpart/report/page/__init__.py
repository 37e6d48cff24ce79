"""Report pages: one HTML file each, complete in itself.

A page is a value (`Page`) made by one of the builders here and written by `write_page`. Its content
is `content`, its looks are `templates/`, `style.css` and `scripts/`, the libraries it carries
`libraries/` (packed by tools/page/).
"""

from sfcpart.report.page.compare import compare_page
from sfcpart.report.page.content import (
    Axis,
    Chart,
    ColumnHead,
    Figure,
    MatrixPlot,
    Page,
    Series,
    TablePlot,
)
from sfcpart.report.page.forecast import forecast_page
from sfcpart.report.page.rebalance import rebalance_page
from sfcpart.report.page.replay import replay_page
from sfcpart.report.page.split import split_page
from sfcpart.report.page.write import render_page, write_page

__all__ = [
    "Axis",
    "Chart",
    "ColumnHead",
    "Figure",
    "MatrixPlot",
    "Page",
    "Series",
    "TablePlot",
    "compare_page",
    "forecast_page",
    "rebalance_page",
    "render_page",
    "replay_page",
    "split_page",
    "write_page",
]
