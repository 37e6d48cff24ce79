"""`sfcpart inspect`: what a mesh file holds, and what is wrong with it."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from sfcpart.cli.options import mesh_argument, output_options, prepare_process

if TYPE_CHECKING:
    from sfcpart.measure.survey import FieldNote, Survey

__all__ = ["command"]

HELP = """Say what MESH holds and what is wrong with it, before it is split.

Cells by kind, size and stretch; connected pieces; boundary groups; fields that can serve as
weights; the memory a split will need; inverted cells, cells without a size or a neighbour, and
points that coincide and leave cracks (--merge-points closes them, here and in split).

\b
Examples:
  sfcpart inspect meshes/channel_section.msh
  sfcpart inspect meshes/turbine.vtu --json
  sfcpart inspect meshes/channel_mixed.vtu --merge-points 1e-6
"""
MOST_NAMES = 12


@click.command("inspect", help=HELP)
@mesh_argument
@click.option(
    "--merge-points",
    type=float,
    metavar="TOL",
    help="Merge points nearer than TOL first: closes cracks between blocks.",
)
@click.option("--threads", type=int, metavar="T", help="Threads to use (default: all allowed).")
@output_options
def command(
    mesh: str, merge_points: float | None, threads: int | None, as_json: bool, quiet: bool
) -> None:
    """Read, look over, print."""
    prepare_process(threads)
    from sfcpart import api
    from sfcpart.cli.console import Stages, print_json
    from sfcpart.cli.ranks import read_held

    doing = Stages(quiet=quiet or as_json)
    with doing(f"reading {mesh}"):
        loaded = read_held(mesh, merge_points=merge_points)
    with doing("looking it over"):
        survey = api.inspect(loaded)
    if as_json:
        print_json({"mesh": mesh, **survey.to_json_dict()})
    elif not quiet:
        _print(mesh, survey)


def _print(mesh: str, survey: Survey) -> None:
    """Print the line, the facts, the fields, the faults."""
    from sfcpart.cli.console import print_pairs, print_table
    from sfcpart.cli.figures import counted

    faults = len(survey.warnings)
    found = "nothing to complain about" if not faults else f"{faults} remark{'s'[: faults - 1]}"
    print(f"{mesh}: {counted(survey.n_cells, 'cell')} in {survey.dim}-D, {found}\n")
    print_pairs(_facts(survey))
    if survey.fields:
        print()
        rows = [_field(note) for note in survey.fields]
        print_table(["cell field", "type", "least", "most", "sum", "as weight"], rows)
    if survey.warnings:
        print()
        print_pairs([(f"{k}.", text) for k, text in enumerate(survey.warnings, start=1)])


def _facts(survey: Survey) -> list[tuple[str, str]]:
    """Return names and texts of what is known."""
    from sfcpart.cli.figures import number

    kinds = ", ".join(f"{count:,} {name}" for name, count in survey.kinds.items())
    corners = list(zip(survey.lowest, survey.highest, strict=True))[: survey.space_dim]
    box = " x ".join(f"[{low + 0.0:.6g}, {high + 0.0:.6g}]" for low, high in corners)
    measure = survey.cells.measure
    unused = f", {survey.n_unused_points:,} of them unused" if survey.n_unused_points else ""
    rows = [
        ("cells", kinds),
        ("points", f"{survey.n_points:,}{unused}" if survey.n_points else "none"),
        ("box", box),
        (
            "size",
            f"{_size(measure['sum'])} in all; a cell {number(measure['smallest'])} to "
            f"{number(measure['largest'])}, median {number(measure['median'])}",
        ),
    ]
    if survey.cells.stretch is not None:
        stretch = survey.cells.stretch
        text = f"longest edge over shortest: median {number(stretch['median'])}, at most "
        most = f"{number(stretch['largest'])} (cell {survey.cells.most_stretched})"
        rows.append(("stretch", text + most))
    rows += _faces(survey)
    rows.append(("memory", f"a split will need about {survey.split_memory / 1e9:.2g} GB"))
    return rows


def _size(total: float) -> str:
    """Write the size of a mesh in full, as it may have to agree with a drawing."""
    return f"{total:,.10g}"


def _faces(survey: Survey) -> list[tuple[str, str]]:
    """Return what the cell graph tells, and the boundary groups."""
    if survey.component_size is None:
        return [("faces", "unknown: the mesh is known by its centres only")]
    sizes = survey.component_size
    pieces = "all cells connected" if len(sizes) == 1 else f"{len(sizes):,}, the largest of "
    if len(sizes) > 1:
        pieces += ", ".join(f"{size:,}" for size in sizes[:3]) + " cells"
    rows = [
        ("faces", f"{survey.n_inner_faces:,} inner, {survey.n_boundary_faces:,} on the boundary"),
        ("pieces", pieces),
    ]
    if survey.boundary:
        groups = [f"{group.name} ({group.n_elements:,})" for group in survey.boundary]
        more = f" and {len(groups) - MOST_NAMES} more" if len(groups) > MOST_NAMES else ""
        rows.append(("groups", ", ".join(groups[:MOST_NAMES]) + more))
    return rows


def _field(note: FieldNote) -> list[str]:
    """Return the row of one field."""
    from sfcpart.cli.figures import number

    figures: list[Any] = [note.smallest, note.largest, note.sum]
    usable = "yes" if note.usable_as_weight else "no"
    return [note.name, note.dtype, *map(number, figures), usable]
