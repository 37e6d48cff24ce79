"""`sfcpart compare`: several ways to split one mesh, measured alike, side by side."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from sfcpart.cli.options import (
    PAIR,
    mesh_argument,
    network_options,
    output_options,
    prepare_process,
    step_model,
)
from sfcpart.cli.wishes import METHOD, MethodOption, check_part_count, wish_options

if TYPE_CHECKING:
    from sfcpart.comparison import Comparison
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = ["command"]

HELP = """Split MESH in several ways and measure all alike.

The best figure of each column is marked with *. A method that cannot do what was asked says why.

\b
Examples:
  sfcpart compare meshes/channel_mixed.vtu --parts 8
  sfcpart compare meshes/channel_mixed.vtu -n 8 --method hilbert --method rows --weight work
  sfcpart compare meshes/channel_mixed.vtu -n 5 --method hilbert --given mine:cell_part.npy --json
"""
COLUMNS = {
    "imbalance": "imbal.",
    "cut_faces": "cut",
    "halo_cells": "halo",
    "neighbours_max": "meets",
    "n_split_parts": "broken",
    "surface_ratio_mean": "surface",
    "efficiency": "effic.",
    "split_seconds": "split",
    "peak_bytes": "memory",
}


@click.command("compare", help=HELP)
@mesh_argument
@click.option(
    "-m",
    "--method",
    "methods",
    cls=MethodOption,
    type=METHOD,
    multiple=True,
    metavar="NAME",
    help="A way to split; repeat for several. All by default: NAMES.",
)
@click.option(
    "--given",
    "given_parts",
    type=PAIR,
    multiple=True,
    metavar="NAME:FIELD|FILE",
    help="A partition from elsewhere: a cell field of MESH, a file of integers or a folder.",
)
@click.option(
    "--steps",
    type=click.IntRange(min=1),
    default=10_000,
    show_default=True,
    help="Length of the run whose total time is predicted.",
)
@click.option("--csv", "csv_path", type=click.Path(), metavar="FILE", help="Write a row a method.")
@wish_options
@network_options
@output_options
def command(mesh: str, **given: Any) -> None:
    """Read, split in each way, print."""
    check_part_count(given)
    prepare_process(given["threads"])
    model = step_model(given)
    from sfcpart import api
    from sfcpart.cli.console import Stages, print_json
    from sfcpart.cli.inputs import read_mesh
    from sfcpart.cli.wishes import load_wish, shape_wish

    doing = Stages(quiet=given["quiet"] or given["as_json"])
    with doing(f"reading {mesh}"):
        loaded = read_mesh(mesh, merge_points=given["merge_points"])
        others = {name: _parts(loaded, place) for name, place in given["given_parts"]}
    with doing("splitting and measuring"):
        comparison = api.compare(
            loaded,
            given["n_parts"],
            methods=list(given["methods"]) or None,
            given=others,
            steps=given["steps"],
            step_model=model,
            **shape_wish(given),
            **load_wish(given),
        )
    if given["csv_path"]:
        _write_csv(given["csv_path"], comparison)
    if given["as_json"]:
        print_json({"mesh": mesh, "n_parts": given["n_parts"], **comparison.to_json_dict()})
    elif not given["quiet"]:
        print(f"{mesh}: {loaded.n_cells:,} cells into {given['n_parts']:,} parts\n")
        _print(comparison)


def _parts(mesh: Mesh, place: str) -> Partition:
    """Take a partition from a cell field, or else from a path."""
    from sfcpart.cli.inputs import partition_from_field, partition_from_path

    if place in mesh.cell_fields:
        return partition_from_field(mesh, place)
    return partition_from_path(place, mesh.n_cells)


def _print(comparison: Comparison) -> None:
    """Print a row a method, the best figures marked; then what failed, and the quickest run."""
    from sfcpart.cli.console import print_pairs, print_table
    from sfcpart.cli.figures import seconds

    best = comparison.best()
    figures = list(comparison.figures())
    rows = []
    for k, (row, values) in enumerate(zip(comparison.rows, figures, strict=True)):
        if not row.failure:
            cells = [_cell(c, values[c], best=k in best.get(c, ())) for c in COLUMNS]
            rows.append([row.name, *cells])
    print_table(["method", *COLUMNS.values()], rows)
    failed = [(row.name, row.failure) for row in comparison.rows if row.failure]
    if failed:
        print()
        print_pairs(failed)
    runs = best.get("run_seconds", [])
    if runs:
        names = " and ".join(comparison.rows[k].name for k in runs)
        total = seconds(figures[runs[0]]["run_seconds"])
        print(f"\nshortest predicted run of {comparison.steps:,} steps: {names}, {total}")


def _cell(name: str, value: Any, *, best: bool) -> str:
    """Write a figure, with a star if no other is better."""
    from sfcpart.cli.figures import number, percent, seconds

    if name in ("imbalance", "efficiency"):
        text = percent(value)
    elif name == "split_seconds":
        text = seconds(value)
    elif name == "peak_bytes":
        text = "-" if value is None else f"{value / 1e6:,.0f} MB"
    else:
        text = number(value)
    return f"{text}*" if best else f"{text} "


def _write_csv(path: str, comparison: Comparison) -> None:
    """Write one row a method, all figures."""
    import csv

    from sfcpart.cli.outputs import new_file

    rows = comparison.to_json_dict()["rows"]
    with new_file(path) as place, place.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, list(rows[0]), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)
