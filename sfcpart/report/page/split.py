"""The page of one partition: verdict, figures, loads, who meets whom, shapes, every part."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import FloatArray
from sfcpart.report.numbers import number, percent, seconds
from sfcpart.report.page.content import Axis, Chart, Figure, Page, Section, Series
from sfcpart.report.page.meetings import meeting_sections
from sfcpart.report.page.parts_table import parts_table
from sfcpart.report.page.space import view_section
from sfcpart.report.verdict import counted_parts, judge

if TYPE_CHECKING:
    from sfcpart.graph import CellGraph
    from sfcpart.measure.assessment import Assessment
    from sfcpart.measure.step_model import StepModel
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = [
    "CAUTION",
    "load_chart",
    "model_notes",
    "split_figures",
    "split_page",
    "step_model_notes",
]

CAUTION = (
    "A partition changes the order in which a solver sums, hence the last digits of a parallel "
    "run. It says nothing about whether a simulation is right."
)
MOST_BARS = 1_200
LEAST_SPAN = 0.05  # a chart of loads never magnifies less than this


def split_page(
    mesh: Mesh,
    partition: Partition,
    *,
    assessment: Assessment,
    graph: CellGraph | None = None,
    title: str = "",
    levels: Sequence[int] | None = None,
    options: Mapping[str, Any] | None = None,
) -> Page:
    """Make the page of one partition.

    Parameters
    ----------
    mesh : Mesh
    partition : Partition
    assessment : Assessment
        Of the partition; the page shows its figures as they stand in `summary.json`.
    graph : CellGraph, optional
        Of the mesh; without it neither colours nor faces inside a solid are known.
    title : str
        Such as the name of the mesh.
    levels : sequence of int, optional
        Sizes of nested levels, whose ranks the parts can be coloured by.
    options : mapping, optional
        What was asked for.

    Returns
    -------
    Page

    Notes
    -----
    O(n_cells) to find the faces to draw, plus a sort of those.
    """
    n_cells, n_parts = partition.n_cells, partition.n_parts
    sections: list[Section] = [
        view_section(mesh, partition, assessment=assessment, graph=graph, levels=levels),
        load_chart(assessment),
        *meeting_sections(assessment),
        *_shape_charts(assessment, mesh),
        parts_table(assessment),
    ]
    summary = assessment.to_json_dict()
    del summary["part"]  # the table of parts holds it
    return Page(
        title=title or f"{n_parts:,} parts",
        subtitle=f"{n_cells:,} cells in {n_parts:,} parts",
        verdict=judge(assessment),
        figures=split_figures(assessment),
        sections=sections,
        notes=[*_option_notes(options or {}), *model_notes(assessment)],
        summary=summary,
    )


def split_figures(assessment: Assessment) -> list[Figure]:
    """Return the figures of note with the bounds they are held against."""
    total = assessment.total
    unweighted = percent(total["imbalance_unweighted"])
    figures = [
        Figure(
            "imbalance",
            "Imbalance",
            total["imbalance"],
            percent(total["imbalance"]),
            f"no split below {percent(total['least_imbalance'])}; cells alone {unweighted}",
        )
    ]
    if total["limit_share"] is not None:
        share = total["limit_share"]
        figures.append(
            Figure("limit_share", "Of the limit", share, percent(share), "in the fullest part")
        )
    if total["cut_faces"] is not None:
        figures += _face_figures(assessment)
    if total["n_empty_parts"]:
        empty = total["n_empty_parts"]
        note = counted_parts(assessment.empty_parts.tolist())
        figures.append(Figure("n_empty_parts", "Empty parts", empty, number(empty), note))
    return figures


def _face_figures(assessment: Assessment) -> list[Figure]:
    """Return the figures that need faces."""
    total = assessment.total

    def figure(key: str, title: str, write: Any, note: str) -> Figure:
        return Figure(key, title, total[key], write(total[key]), note)

    pieces = "every part in one piece"
    if total["n_split_parts"]:
        pieces = counted_parts(assessment.split_parts.tolist())
    halo_most = f"at most {number(total['halo_cells_max'])} a part"
    figures = [
        figure("cut_faces", "Faces cut", number, _cut_note(total)),
        figure("halo_cells", "Halo cells", number, f"{halo_most}, once an exchange"),
        figure(
            "neighbours_max",
            "Neighbours, most",
            number,
            f"{number(total['neighbours_mean'])} on average; smallest interface "
            f"{number(total['smallest_interface'])} faces",
        ),
        figure("n_split_parts", "Parts in pieces", number, pieces),
        figure(
            "step_seconds",
            "Predicted step",
            seconds,
            f"{percent(total['exchange_share'])} of it messages, in the slowest part",
        ),
        figure(
            "efficiency",
            "Efficiency",
            percent,
            f"speed-up {number(total['speed_up'])} on {number(total['n_parts'])} ranks",
        ),
    ]
    if total["surface_ratio_mean"] is not None:
        worst = number(total["surface_ratio_max"])
        note = f"times that of a ball or disc; {worst} at worst"
        figures.insert(3, figure("surface_ratio_mean", "Surface, mean", number, note))
    return figures


def _cut_note(total: Mapping[str, Any]) -> str:
    """Hold the cut against all faces, and against the least there can be."""
    note = f"{percent(total['cut_share'])} of the inner faces"
    for key in ("cut_faces_ratio", "cut_measure_ratio"):
        if total[key] is not None:
            what = "" if key == "cut_faces_ratio" else ", by measure"
            return f"{note}; {number(total[key])} times the least possible{what}"
    return note


def load_chart(assessment: Assessment) -> Chart:
    """Show how far each part is from its fair share, with and without weights."""
    load, cells = _shown(assessment.part["load"]), _shown(assessment.part["load_unweighted"])
    order = np.lexsort((np.arange(len(load)), -load))
    order = order[_evenly(len(order), MOST_BARS)]
    place = np.arange(len(order))
    names = [f"part {part:,}" for part in order.tolist()]
    total = assessment.total
    span = max(LEAST_SPAN, float(np.abs(load - 1).max()), float(np.abs(cells - 1).max()))
    few = "" if len(order) == len(load) else f" Shown: {len(order):,} of {len(load):,} parts."
    return Chart(
        "Load of each part",
        "How far each part is from its fair share of the work (speeds of ranks accounted for), "
        "most loaded first. The step takes as long as the leftmost bar." + few,
        x=Axis("parts, most loaded first"),
        y=Axis("above fair share", form="percent", least=-span, most=span),
        series=[
            Series("by weight", "bar", place, load[order] - 1, names),
            Series("by number of cells", "tick", place, cells[order] - 1, names, colour=1),
        ],
        summary=f"Bars of {len(load):,} parts. The most loaded part carries "
        f"{percent(total['imbalance'])} more than its share, by number of cells "
        f"{percent(total['imbalance_unweighted'])}. The table of parts holds all loads.",
    )


def _shown(column: Any) -> FloatArray:
    """Return a column that is always there."""
    return np.asarray(column, np.float64)


def _evenly(count: int, most: int) -> Any:
    """Pick at most so many places, evenly, first and last among them."""
    if count <= most:
        return np.arange(count)
    return np.unique(np.rint(np.linspace(0, count - 1, most)).astype(np.int64))


def _shape_charts(assessment: Assessment, mesh: Mesh) -> list[Chart]:
    """Show the surface of each part against the least that holds its volume."""
    ratio = assessment.part["surface_ratio"]
    if ratio is None:
        return []
    part = np.flatnonzero(np.isfinite(ratio))
    order = part[np.argsort(-ratio[part], kind="stable")]
    order = order[_evenly(len(order), MOST_BARS)]
    place = np.arange(len(order))
    names = [f"part {p:,}" for p in order.tolist()]
    body, box, side = ("ball", "cube", 1.24) if mesh.dim == 3 else ("disc", "square", 1.13)
    total = assessment.total
    return [
        Chart(
            "Surface against the least possible",
            f"Surface of each part over that of the {body} of the same size, roundest last: below "
            f"1 nothing is possible (isoperimetric inequality), a {box} has {side}. Surface is "
            "what a part exchanges across; boundary of the mesh included.",
            x=Axis("parts, largest surface first"),
            y=Axis("surface over least", least=0.9),
            series=[
                Series("parts", "dot", place, np.asarray(ratio)[order], names),
                Series(f"{body}: least possible", "rule", [0], [1.0], colour=2),
                Series(f"{box}", "rule", [0], [side], colour=1),
            ],
            summary=f"Dots of {len(part):,} parts: {number(total['surface_ratio_mean'])} on "
            f"average, {number(total['surface_ratio_max'])} at worst.",
            height=220,
        )
    ]


def _option_notes(options: Mapping[str, Any]) -> list[tuple[str, str]]:
    """Write down what was asked for."""
    told = {k: v for k, v in options.items() if v is not None and v not in ((), [], "")}
    return [(name.replace("_", " "), _told(value)) for name, value in told.items()]


def _told(value: Any) -> str:
    """Write an option's value."""
    if isinstance(value, list | tuple):
        return ", ".join(map(_told, value))
    return number(value) if isinstance(value, int) and not isinstance(value, bool) else str(value)


def model_notes(assessment: Assessment) -> list[tuple[str, str]]:
    """Write down the model of a step, what it leaves out, and the caution."""
    return [*step_model_notes(assessment.step_model), ("caution", CAUTION)]


def step_model_notes(model: StepModel) -> list[tuple[str, str]]:
    """Write down the model of a step and what it leaves out."""
    network = model.network
    return [
        (
            "model of a step",
            f"{seconds(model.cell_seconds)} a cell, {number(model.exchanges)} exchanges of "
            f"{number(model.bytes_per_halo_cell)} bytes a halo cell; network {network.name}: "
            f"{seconds(network.latency)} a message, {number(network.bandwidth / 1e9)} GB/s "
            f"({network.source})",
        ),
        ("the model leaves out", "; ".join(_leaves_out(model))),
    ]


def _leaves_out(model: StepModel) -> list[str]:
    """Return what the model does not see."""
    told = model.to_json_dict()["leaves_out"]
    return [str(item) for item in told] if isinstance(told, list) else []
