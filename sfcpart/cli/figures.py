"""Put an assessment on the screen: one line, a table of totals, a table of parts."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from sfcpart.cli.console import console, print_pairs, print_table
from sfcpart.report.numbers import counted, number, percent, seconds
from sfcpart.report.verdict import listed

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from sfcpart.measure.assessment import Assessment

__all__ = ["counted", "number", "percent", "print_assessment", "print_verdict"]

MOST_PARTS = 12
_PART_HEADS = {
    "part": "part",
    "cells": "cells",
    "load": "load",
    "load_unweighted": "by cells",
    "limit_share": "limit",
    "cut_faces": "cut",
    "halo_cells": "halo",
    "neighbours": "meets",
    "smallest_interface": "least",
    "pieces": "pieces",
    "surface_ratio": "surface",
    "step_seconds": "step",
}


def print_verdict(sentences: Sequence[str]) -> None:
    """Print the verdict, the words of the report page, and an empty line."""
    from rich.text import Text

    out = console()
    with out.capture() as captured:
        out.print(Text(" ".join(sentences)), soft_wrap=False)
    print("\n".join(line.rstrip() for line in captured.get().splitlines()), end="\n\n")


def print_assessment(assessment: Assessment) -> None:
    """Print the totals and the parts (the slowest ones, if there are many)."""
    print_pairs(_totals(assessment))
    print()
    rows = list(assessment.rows())
    shown = rows if len(rows) <= MOST_PARTS else _slowest(rows)
    heads = {k: head for k, head in _PART_HEADS.items() if any(r[k] is not None for r in rows)}
    if all(row["load"] == row["load_unweighted"] for row in rows):
        del heads["load_unweighted"]
    title = "" if shown is rows else f"the {len(shown)} slowest of {len(rows):,} parts"
    print_table(
        list(heads.values()), [[_cell(row, k) for k in heads] for row in shown], title=title
    )


def _cell(row: dict[str, Any], name: str) -> str:
    """Write one figure of one part."""
    if name in ("load", "load_unweighted", "limit_share"):
        return "-" if row[name] is None else f"{row[name]:.3f}"
    return seconds(row[name]) if name == "step_seconds" else number(row[name])


def _slowest(rows: list[dict[str, Any]]) -> list[dict[str, Any]]:
    """Pick the parts that hold the others up."""

    def slowness(row: dict[str, Any]) -> tuple[float, float]:
        return -(row["step_seconds"] or 0.0), -(row["load"] or 0.0)

    return sorted(rows, key=slowness)[:MOST_PARTS]


def _totals(assessment: Assessment) -> list[tuple[str, str]]:
    """Return names and texts of the totals, what is unknown left out."""
    total = assessment.total
    rows = [
        ("parts", f"{number(total['n_parts'])} of {counted(total['n_cells'], 'cell')}"),
        (
            "imbalance",
            f"{percent(total['imbalance'])} (least possible "
            f"{percent(total['least_imbalance'])}); cells alone "
            f"{percent(total['imbalance_unweighted'])}",
        ),
    ]
    if total["limit_share"] is not None:
        rows.append(("limit", f"the fullest part holds {percent(total['limit_share'])} of it"))
    if total["n_empty_parts"]:
        rows.append(("empty parts", listed(assessment.empty_parts.tolist())))
    if total["cut_faces"] is not None:
        rows += _face_totals(assessment)
    return rows


def _face_totals(assessment: Assessment) -> list[tuple[str, str]]:
    """Return the totals that need faces."""
    total = assessment.total
    cut = f"{number(total['cut_faces'])} of {number(total['n_faces'])} faces"
    cut += f" ({percent(total['cut_share'])}), measure {number(total['cut_measure'])}"
    for name in ("cut_faces_ratio", "cut_measure_ratio"):
        if total[name] is not None:
            cut += f"; {number(total[name])} times the least possible"
            break
    mean = number(total["neighbours_mean"])
    pieces = "every part in one piece"
    if total["n_split_parts"]:
        plural = "parts" if total["n_split_parts"] > 1 else "part"
        pieces = f"in several pieces: {plural} {listed(assessment.split_parts.tolist())}"
    model = assessment.step_model
    step = f"{seconds(total['step_seconds'])}, of which {percent(total['exchange_share'])}"
    return [
        ("cut", cut),
        (
            "halo",
            f"{number(total['halo_cells'])} cells, at most {number(total['halo_cells_max'])} a "
            f"part; neighbours {mean} on average, {number(total['neighbours_max'])} at most; "
            f"smallest interface {counted(total['smallest_interface'], 'face')}",
        ),
        ("shape", _shape(total)),
        ("pieces", pieces),
        (
            "step",
            f"{step} messages; speed-up {number(total['speed_up'])}, efficiency "
            f"{percent(total['efficiency'])} (model, network {model.network.name})",
        ),
    ]


def _shape(total: Mapping[str, Any]) -> str:
    """Tell how round the parts are; surfaces in 3-D have no least surface to compare with."""
    stretch = f"stretch at most {number(total['stretch_max'])}"
    if total["surface_ratio_mean"] is None:
        return stretch
    return (
        f"surface {number(total['surface_ratio_mean'])} times the least on average, "
        f"{number(total['surface_ratio_max'])} at worst; {stretch}"
    )
