"""`sfcpart rebalance`: divide a mesh again when the work has moved, and tell whether it pays."""

from __future__ import annotations

from typing import Any

import click

from sfcpart.cli.options import (
    Names,
    mesh_argument,
    network_options,
    output_options,
    prepare_process,
    step_model,
)
from sfcpart.cli.wishes import METHOD, MethodOption, check_part_count, wish_options

__all__ = ["command"]

HELP = """Divide MESH again so that little moves, and tell whether it pays.

OLD is the split in use: a cell field of MESH, a text or .npy file of integers, or a folder that
split wrote. Weights are the new ones. The number of parts stays unless --parts says otherwise.

\b
Ways (--way):
  shift     shift the cuts along the curve: the least moved work of all such splits
  smooth    smooth the old borders, with a price on moving
  scratch   split from scratch with --method, then name the parts to move the least
  auto      try all and take the least predicted time of the steps to come and of moving

\b
Examples:
  sfcpart rebalance meshes/channel_mixed.vtu --from parts --weight work
  sfcpart rebalance meshes/channel_mixed.vtu --from cell_part.npy -w work --way scratch
  sfcpart rebalance meshes/channel_mixed.vtu --from parts -n 6 --way shift -o parts_6
  sfcpart rebalance meshes/turbine.vtu --from body --steps 500 --json

On a mesh that was refined or coarsened give the parent of each cell (--parent), what merged cells
became (--merged-into), or the old mesh; --together FIELD keeps families in one part.

\b
Written to DIR: what split writes, and
  migration.h5   who sends which cells to whom (sfcpart manual rebalance)

Predicted times rank splits; they do not replace a measurement. A partition says nothing about
whether a simulation is right.
"""


def _ways() -> list[str]:
    """Load the names of the ways."""
    from sfcpart.resplit.ways import AUTO, WAYS

    return [AUTO, *WAYS]


@click.command("rebalance", help=HELP)
@mesh_argument
@click.option(
    "--from",
    "old",
    type=str,
    required=True,
    metavar="OLD",
    help="The split in use: a cell field of MESH (or of --old-mesh), a file, or a folder.",
)
@click.option(
    "--old-mesh",
    type=click.Path(),
    metavar="FILE",
    help="The mesh of OLD, if it is another: cells come from the nearest old one.",
)
@click.option(
    "--parent",
    metavar="FIELD|FILE",
    help="Old cell that each cell is or is a child of (-1: unknown): a cell field or a file.",
)
@click.option(
    "--merged-into",
    type=click.Path(),
    metavar="FILE",
    help="For each old cell the cell of MESH it became a piece of (-1: none).",
)
@click.option(
    "--way",
    type=Names("way", _ways),
    default="auto",
    show_default=True,
    metavar="NAME",
    help="How to re-split: auto, shift, smooth, scratch.",
)
@click.option(
    "-m",
    "--method",
    cls=MethodOption,
    type=METHOD,
    metavar="NAME",
    default="hilbert",
    show_default=True,
    help="What splits from scratch, and whose curve is shifted along: NAMES.",
)
@click.option(
    "--keep",
    type=click.Choice(["total", "busiest"]),
    default="total",
    show_default=True,
    help="What new names of parts keep small: all that moves, or what the busiest part moves.",
)
@click.option(
    "--steps",
    type=click.IntRange(min=1),
    default=1000,
    show_default=True,
    help="Steps of the solver until the split is looked at again.",
)
@click.option(
    "--cell-bytes",
    type=click.FloatRange(min=0),
    default=200.0,
    show_default=True,
    metavar="B",
    help="Bytes that a moving cell takes along.",
)
@click.option(
    "-o", "--output", type=click.Path(), metavar="DIR", help="Folder to write, new or empty."
)
@click.option("--overwrite", is_flag=True, help="Replace what an earlier run wrote to DIR.")
@wish_options
@click.option(
    "-f",
    "--format",
    "formats",
    type=click.Choice(["vtkhdf", "vtu", "same"]),
    multiple=True,
    help="As for split. Repeat for several.",
)
@click.option(
    "--layers", type=int, default=1, show_default=True, metavar="K", help="Layers of the halo."
)
@click.option(
    "--across",
    type=click.Choice(["faces", "points"]),
    default="faces",
    show_default=True,
    help="What the halo goes across.",
)
@click.option("--picture", is_flag=True, help="Write parts.png as well.")
@click.option("--report", is_flag=True, help="Write the page report.html as well.")
@network_options
@output_options
def command(**given: Any) -> None:
    """Parse, split again, write, print."""
    quiet, as_json = given.pop("quiet"), given.pop("as_json")
    if given["levels"] is not None or given["n_parts"] is not None:
        check_part_count(given)
    _check_output(given)
    prepare_process(given.pop("threads"))
    model = step_model(given)
    from sfcpart.cli.rebalance_job import RebalanceJob

    job = RebalanceJob(given, step_model=model, quiet=quiet or as_json)
    job.run()
    job.report(as_json=as_json, quiet=quiet)


def _check_output(given: dict[str, Any]) -> None:
    """Refuse options for output without a place for it, before anything is loaded."""
    if given["output"] is not None:
        return
    for name in ("overwrite", "picture", "report", "formats"):
        if given[name]:
            spelled = "format" if name == "formats" else name
            raise click.UsageError(f"--{spelled} needs a folder to write to: give -o DIR")
