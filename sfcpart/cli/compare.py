"""`sfcpart compare`: several ways to split one mesh, measured alike, side by side."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from sfcpart.cli.options import (
    NAMED,
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
    from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["command"]

HELP = """Split MESH in several ways and measure all alike.

The best figure of each column is marked with *. A method that cannot do what was asked says why.
Times leave compilation out and count the cell graph for methods that need it; memory is what the
split takes beyond mesh and graph. JSON and CSV hold all figures (sfcpart figures explains them).

\b
Examples:
  sfcpart compare meshes/channel_mixed.vtu --parts 8
  sfcpart compare meshes/channel_mixed.vtu -n 8 -m hilbert -m rows --weight work
  sfcpart compare meshes/channel_section.msh -n 6 --report methods.html --csv splits.csv
  sfcpart compare meshes/channel_mixed.vtu -n 5 -m hilbert --given mine:cell_part.npy --json
"""


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
    type=NAMED,
    multiple=True,
    metavar="NAME:FIELD|FILE",
    help="A partition from elsewhere as one more row: a cell field of MESH, a text or .npy file of "
    "integers, or a folder that split wrote. Repeat for several.",
)
@click.option(
    "--steps",
    type=click.IntRange(min=1),
    default=10_000,
    show_default=True,
    help="Length of the run whose total time is predicted.",
)
@click.option(
    "--repeat",
    type=click.IntRange(min=1),
    default=1,
    show_default=True,
    help="Split so often each way; the median time counts.",
)
@click.option("--csv", "csv_path", type=click.Path(), metavar="FILE", help="Write a row a method.")
@click.option(
    "--picture", type=click.Path(), metavar="FILE", help="Draw the splits side by side as PNG."
)
@click.option("--report", type=click.Path(), metavar="FILE", help="Write a report page (HTML).")
@wish_options
@network_options
@output_options
def command(mesh: str, **given: Any) -> None:
    """Read, split in each way, write, print."""
    check_part_count(given)
    _check_names(given)
    prepare_process(given["threads"])
    model = step_model(given)
    from sfcpart import api
    from sfcpart.cli.compare_table import print_comparison
    from sfcpart.cli.console import Stages, print_json
    from sfcpart.cli.figures import print_verdict
    from sfcpart.cli.ranks import once, read_held
    from sfcpart.cli.wishes import load_wish, shape_wish
    from sfcpart.methods.registry import METHODS
    from sfcpart.report.verdict import judge_comparison

    quiet = given["quiet"] or given["as_json"]
    methods = list(given["methods"]) or list(METHODS)
    doing = Stages(quiet=quiet, methods=methods)
    with doing(f"reading {mesh}"):
        loaded = read_held(mesh, merge_points=given["merge_points"])
        others = {name: _given_parts(loaded, place) for name, place in given["given_parts"]}
    with doing.counted("splitting", len(methods)) as progress:
        comparison = api.compare(
            loaded,
            given["n_parts"],
            methods=list(given["methods"]) or None,
            given=others,
            steps=given["steps"],
            repeat=given["repeat"],
            step_model=model,
            progress=progress,
            **shape_wish(given),
            **load_wish(given),
        )
    if given["csv_path"]:
        once(lambda: _write_csv(given["csv_path"], comparison))
    if given["picture"]:
        with doing(f"drawing {given['picture']}"):
            whole, gathered = _whole(loaded, comparison)
            once(lambda: _draw(given["picture"], mesh, whole, gathered))
    if given["report"]:
        with doing(f"writing {given['report']}"):
            once(lambda: _write_page(given["report"], mesh, loaded.n_cells, comparison))
    if given["as_json"]:
        print_json({"mesh": mesh, "n_parts": given["n_parts"], **comparison.to_json_dict()})
    elif not given["quiet"]:
        print(f"{mesh}: {loaded.n_cells:,} cells into {given['n_parts']:,} parts")
        print_verdict(judge_comparison(comparison))
        print_comparison(comparison)


def _check_names(given: dict[str, Any]) -> None:
    """Refuse two partitions of one name, before anything is loaded."""
    names = [name for name, _ in given["given_parts"]]
    twice = [name for k, name in enumerate(names) if name in names[:k]]
    if twice:
        raise click.UsageError(f"two partitions are named {twice[0]!r}; name each its own")


def _given_parts(mesh: Mesh | MeshSlice, place: str) -> Partition:
    """Return parts from a field, a file or a folder."""
    from sfcpart.cli.inputs import partition_from_place
    from sfcpart.slices.mesh_slice import MeshSlice

    if not isinstance(mesh, MeshSlice):
        return partition_from_place(mesh.cell_fields, place, mesh.n_cells)
    from sfcpart.cli.sliced_parts import partition_of_slice

    if place in mesh.mesh.cell_fields:
        return partition_of_slice(mesh, None, place)
    return partition_of_slice(mesh, place, None)


def _whole(mesh: Mesh | MeshSlice, comparison: Comparison) -> tuple[Any, Comparison]:
    """Return mesh and partitions as wholes, where they are drawn (collective)."""
    from sfcpart.cli.ranks import whole_of

    there = [row.partition for row in comparison.rows if row.partition is not None]
    whole, partitions = whole_of(mesh, there)
    left = iter(partitions)
    rows = tuple(
        row if row.partition is None else replace(row, partition=next(left))
        for row in comparison.rows
    )
    return whole, replace(comparison, rows=rows)


def _draw(path: str, name: str, mesh: Mesh, comparison: Comparison) -> None:
    """Draw all partitions there are; say which methods gave none."""
    from sfcpart.api import graph_of
    from sfcpart.cli.outputs import new_file
    from sfcpart.errors import InputError
    from sfcpart.report.side_by_side import DrawnSplit, draw_side_by_side

    splits = [
        DrawnSplit(row.name, row.partition, row.assessment.total)
        for row in comparison.rows
        if row.partition is not None and row.assessment is not None
    ]
    if not splits:
        raise InputError(f"no method gave a split to draw: {comparison.rows[0].failure}")
    failed = [row.name for row in comparison.rows if row.failure]
    notes = [f"No split by: {', '.join(failed)}."] if failed else []
    with new_file(path) as place:
        draw_side_by_side(place, mesh, splits=splits, graph=graph_of(mesh), title=name, notes=notes)


def _write_page(path: str, name: str, n_cells: int, comparison: Comparison) -> None:
    """Write the report page."""
    from sfcpart.cli.outputs import new_file
    from sfcpart.report.page import compare_page, write_page

    page = compare_page(comparison, title=Path(name).name, n_cells=n_cells)
    with new_file(path) as place:
        write_page(place, page)


def _write_csv(path: str, comparison: Comparison) -> None:
    """Write one row a method, all figures."""
    import csv

    from sfcpart.cli.outputs import new_file

    rows = comparison.to_json_dict()["rows"]
    with new_file(path) as place, place.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, list(rows[0]), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)
