"""Every figure of an assessment, written down once: name, unit, meaning and what it needs.

Tables on screen, CSV, JSON and the documentation all read from here, so that a key means the same
everywhere. Names are stable: a key may be added, none is renamed or removed.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

__all__ = ["PART_COLUMNS", "RUN_COLUMNS", "TOTAL_COLUMNS", "Column", "markdown_table"]


@dataclass(frozen=True)
class Column:
    """One figure.

    Attributes
    ----------
    name : str
        Stable key in mappings, JSON and CSV.
    title : str
        Short heading for a table.
    unit : str
        Unit, or "" for plain ratios; "length", "area" and "volume" are in the mesh's own units.
    meaning : str
        One sentence.
    better : {"lower", "higher", ""}
        Which way is better; "" where neither is.
    needs_faces : bool
        Whether the cell graph is needed; without it the figure is None.
    is_whole : bool
        Whether it is a whole number.
    """

    name: str
    title: str
    unit: str
    meaning: str
    better: Literal["lower", "higher", ""] = ""
    needs_faces: bool = False
    is_whole: bool = False


def _count(name: str, title: str, unit: str, meaning: str) -> Column:
    """Describe a whole number without a better end, known without faces."""
    return Column(name, title, unit, meaning, is_whole=True)


def _face_count(name: str, title: str, unit: str, meaning: str) -> Column:
    """Describe a whole number that needs faces; fewer is better."""
    return Column(name, title, unit, meaning, "lower", needs_faces=True, is_whole=True)


def _lower(name: str, title: str, unit: str, meaning: str) -> Column:
    """Describe a figure known without faces; less is better."""
    return Column(name, title, unit, meaning, "lower")


def _face_lower(name: str, title: str, unit: str, meaning: str) -> Column:
    """Describe a figure that needs faces; less is better."""
    return Column(name, title, unit, meaning, "lower", needs_faces=True)


PART_COLUMNS: tuple[Column, ...] = (
    _count("part", "part", "", "Number of the part, from 0."),
    _count("cells", "cells", "cells", "Cells the part owns."),
    Column("weight", "weight", "weight", "Sum of the weights of its cells (its cells, if none)."),
    Column("speed", "speed", "", "Relative speed of its rank; the mean over all parts is 1."),
    _lower(
        "load",
        "load",
        "",
        "Weight over the fair share of a rank of its speed: 1 is perfect, 1.05 is 5 % too much.",
    ),
    _lower("load_unweighted", "load (cells)", "", "The same with every cell counted as 1."),
    Column("limit_weight", "held", "limit weight", "Sum of the second weight (memory), if given."),
    _lower("limit_share", "of limit", "", "Second weight over the limit of the part, if given."),
    _face_count("cut_faces", "cut faces", "faces", "Faces between its cells and other parts."),
    _face_lower("cut_measure", "cut", "area (length in 2-D)", "Total measure of its cut faces."),
    Column(
        "boundary_faces",
        "boundary faces",
        "faces",
        "Faces of its cells on the boundary of the mesh.",
        needs_faces=True,
        is_whole=True,
    ),
    Column(
        "boundary_measure",
        "boundary",
        "area (length in 2-D)",
        "Total measure of its boundary faces.",
        needs_faces=True,
    ),
    _face_count(
        "halo_cells",
        "halo",
        "cells",
        "Distinct foreign cells that share a face with it: what it receives in one exchange.",
    ),
    _face_count(
        "sent_cells",
        "sent",
        "cells",
        "Cells it sends in one exchange: each of its cells once for every part that needs it.",
    ),
    _face_count("neighbours", "neighbours", "parts", "Parts it shares at least one face with."),
    Column(
        "smallest_interface",
        "least interface",
        "faces",
        "Faces shared with the neighbour it shares fewest with (0 without neighbours): "
        "a few faces cost a full message.",
        "higher",
        needs_faces=True,
        is_whole=True,
    ),
    _face_count("pieces", "pieces", "pieces", "Connected components of its cells (1 is best)."),
    _face_count("stray_cells", "stray", "cells", "Cells outside its largest piece."),
    Column("measure", "size", "volume (area in 2-D)", "Total measure of its cells."),
    _face_lower("surface", "surface", "area (length in 2-D)", "Cut measure + boundary measure."),
    _face_lower("surface_to_measure", "surface/size", "1/length", "Surface over measure."),
    _face_lower(
        "surface_ratio",
        "surface/least",
        "",
        "Surface over that of the ball (disc in 2-D) of equal measure; a cube has 1.24, a square "
        "1.13. Planar and solid meshes only.",
    ),
    _face_lower(
        "faces_to_cells", "faces/cell", "", "Cut and boundary faces over cells: surface counted."
    ),
    _lower(
        "stretch",
        "stretch",
        "",
        "Longest side of the box of its cell centres over the shortest, each side lengthened by "
        "one mean cell size (measure / cells)^(1/dim), so that one layer of cubes stays finite; "
        "on a surface in 3-D over the second longest. None where a side is still 0.",
    ),
    _face_lower("step_seconds", "step", "s", "Predicted time of one step on its rank."),
)
"""Figures of each part, in table order."""

TOTAL_COLUMNS: tuple[Column, ...] = (
    _count("n_parts", "parts", "parts", "Number of parts, empty ones included."),
    _count("n_cells", "cells", "cells", "Number of cells."),
    Column(
        "n_faces",
        "interior faces",
        "faces",
        "Faces between two cells.",
        needs_faces=True,
        is_whole=True,
    ),
    Column("weight", "weight", "weight", "Total weight (cells, if no weights are given)."),
    Column("measure", "size", "volume (area in 2-D)", "Total measure of the cells."),
    _lower(
        "imbalance",
        "imbalance",
        "",
        "Largest load - 1, weighted: by how much the slowest part exceeds the mean, speeds "
        "accounted for.",
    ),
    _lower("imbalance_unweighted", "imbalance (cells)", "", "The same with every cell counted 1."),
    Column(
        "least_imbalance",
        "least imbalance",
        "",
        "No split into as many parts has a smaller weighted imbalance (a lower bound).",
    ),
    Column(
        "least_imbalance_unweighted",
        "least imbalance (cells)",
        "",
        "The smallest unweighted imbalance that exists (exact).",
    ),
    _lower("limit_share", "of limit", "", "Largest share of its limit that a part holds."),
    _face_count("cut_faces", "cut faces", "faces", "Edge cut: faces between cells of two parts."),
    _face_lower("cut_share", "cut share", "", "Cut faces over interior faces."),
    _face_lower("cut_measure", "cut", "area (length in 2-D)", "Total measure of the cut faces."),
    _face_count(
        "halo_cells",
        "halo",
        "cells",
        "Communication volume: halo cells of all parts, as many as cells sent.",
    ),
    _face_count("halo_cells_max", "largest halo", "cells", "Most halo cells of one part."),
    _face_count("neighbours_max", "neighbours (max)", "parts", "Most neighbours of one part."),
    _face_lower("neighbours_mean", "neighbours (mean)", "parts", "Mean over parts with cells."),
    Column(
        "smallest_interface",
        "least interface",
        "faces",
        "Fewest faces that two neighbouring parts share (0 if none meet).",
        "higher",
        needs_faces=True,
        is_whole=True,
    ),
    _face_count(
        "n_split_parts", "parts in pieces", "parts", "Parts in more than one piece (which: listed)."
    ),
    _face_count("pieces_max", "pieces (max)", "pieces", "Most pieces of one part."),
    _face_count("stray_cells", "stray", "cells", "Cells outside the largest piece of their part."),
    Column(
        "n_empty_parts",
        "empty parts",
        "parts",
        "Parts without a cell: many solvers stop on them (which: listed).",
        "lower",
        is_whole=True,
    ),
    _face_lower("surface_ratio_mean", "surface/least (mean)", "", "Mean over parts with cells."),
    _face_lower("surface_ratio_max", "surface/least (max)", "", "Worst part."),
    _lower("stretch_max", "stretch (max)", "", "Worst part."),
    Column(
        "least_cut_faces",
        "least cut faces",
        "faces",
        "No split into parts of these sizes cuts fewer faces; known for uniform lattices of "
        "squares or cubes, None elsewhere.",
        needs_faces=True,
        is_whole=True,
    ),
    _face_lower("cut_faces_ratio", "cut faces/least", "", "Cut faces over that bound."),
    Column(
        "least_cut_measure",
        "least cut",
        "area (length in 2-D)",
        "No split into parts of these measures has a smaller cut measure; known for planar and "
        "solid meshes that have points, and for uniform lattices; None where it says nothing.",
        needs_faces=True,
    ),
    _face_lower("cut_measure_ratio", "cut/least", "", "Cut measure over that bound."),
    _face_lower("step_seconds", "step", "s", "Predicted time of one step: that of the slowest."),
    _face_lower(
        "exchange_share", "exchange", "", "Share of the slowest part's step spent on messages."
    ),
    Column(
        "speed_up",
        "speed-up",
        "",
        "Predicted time on one rank of mean speed over that on all.",
        "higher",
        needs_faces=True,
    ),
    Column(
        "efficiency",
        "efficiency",
        "",
        "Speed-up over the number of parts: 1 is perfect.",
        "higher",
        needs_faces=True,
    ),
)
"""Figures of the whole partition, in table order."""

RUN_COLUMNS: tuple[Column, ...] = (
    _lower(
        "split_seconds",
        "split",
        "s",
        "Time to split, compilation left out; with the cell graph if the method needs it.",
    ),
    Column("graph_seconds", "graph", "s", "What of it went into the cell graph."),
    _lower("peak_bytes", "memory", "bytes", "Memory the split needed beyond mesh and graph."),
    _face_lower(
        "run_seconds",
        "run",
        "s",
        "Predicted time of a run: time to split + steps x predicted step; a partition from "
        "elsewhere took no time to split.",
    ),
)
"""Figures of a way to split, known to a comparison only, in table order."""


def markdown_table(columns: tuple[Column, ...]) -> str:
    """Return the columns as a Markdown table, for the documentation.

    Examples
    --------
    >>> print(markdown_table(PART_COLUMNS[1:2]))
    | key | unit | better | needs faces | meaning |
    |---|---|---|---|---|
    | `cells` | cells |  |  | Cells the part owns. |
    """
    lines = ["| key | unit | better | needs faces | meaning |", "|---|---|---|---|---|"]
    lines += [
        f"| `{column.name}` | {column.unit} | {column.better} | "
        f"{'yes' if column.needs_faces else ''} | {column.meaning} |"
        for column in columns
    ]
    return "\n".join(lines)
