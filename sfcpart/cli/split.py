"""`sfcpart split`: the main job, from a mesh file to a folder a solver loads."""

from __future__ import annotations

from typing import Any

import click

from sfcpart.cli.options import (
    mesh_argument,
    network_options,
    output_options,
    prepare_process,
    step_model,
)
from sfcpart.cli.wishes import METHOD, MethodOption, check_part_count, wish_options

__all__ = ["command"]

HELP = """Divide MESH into parts of equal work with little to exchange.

MESH is any file that meshio reads, VTKHDF, or a file of faces (.h5). Without -o the figures are
printed and nothing is written.

\b
Examples:
  sfcpart split meshes/channel_mixed.vtu --parts 8 -o parts
  sfcpart split meshes/channel_section.msh -n 4 -o parts --periodic inflow:outflow --report
  sfcpart split meshes/channel_mixed.vtu --levels 2x4 -o parts --weight work
  sfcpart split meshes/channel_mixed.vtu -n 4 --speeds 2*1,2*0.5 --format vtu -o parts
  sfcpart split meshes/channel_mixed.vtu -n 8 --limit memory:300 --json
  sfcpart split meshes/turbine.vtu --from body --method smoothed

\b
Written to DIR:
  parts.vtkhdf   all parts, ghost cells marked, global ids, exchange lists for the solver
  parts.csv      figures of each part
  summary.json   versions, options, digest of the input, all figures
  report.html    with --report: a page to look at, offline, complete in itself

A partition changes the order of summation, hence the last digits of a parallel run; it says
nothing about whether a simulation is right.
"""


@click.command("split", help=HELP)
@mesh_argument
@click.option(
    "-o", "--output", type=click.Path(), metavar="DIR", help="Folder to write, new or empty."
)
@click.option("--overwrite", is_flag=True, help="Replace what an earlier run wrote to DIR.")
@click.option(
    "-m",
    "--method",
    cls=MethodOption,
    type=METHOD,
    metavar="NAME",
    default="hilbert",
    show_default=True,
    help="How to split: NAMES.",
)
@click.option(
    "--from",
    "start",
    metavar="FIELD|FILE",
    help="Improve a partition that is there, by --method smoothed: a cell field of MESH, a text or "
    ".npy file of integers, or a folder that split wrote. --parts is then its number of parts.",
)
@wish_options
@click.option(
    "-f",
    "--format",
    "formats",
    type=click.Choice(["vtkhdf", "vtu", "same"]),
    multiple=True,
    help="vtkhdf: one file (default); vtu: a piece a part and a .pvtu; same: the input's own "
    "format with the field `part`. Repeat for several.",
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
    """Parse, split, write, print."""
    quiet, as_json = given.pop("quiet"), given.pop("as_json")
    if given["start"] is not None:
        _check_start(given)
    if given["start"] is None or given["n_parts"] or given["levels"]:
        check_part_count(given)
    _check_output(given)
    prepare_process(given.pop("threads"))
    model = step_model(given)
    from sfcpart.cli.split_job import SplitJob

    job = SplitJob(given, step_model=model, quiet=quiet or as_json)
    job.run()
    job.report(as_json=as_json, quiet=quiet)


def _check_start(given: dict[str, Any]) -> None:
    """Settle the method that improves a start, before anything is loaded."""
    source = click.get_current_context().get_parameter_source("method")
    if source is click.core.ParameterSource.DEFAULT:
        given["method"] = "smoothed"
    if given["method"] != "smoothed":
        raise click.UsageError(
            f"--from is a start for --method smoothed; {given['method']} splits without one"
        )


def _check_output(given: dict[str, Any]) -> None:
    """Refuse options for output without a place for it, before anything is loaded."""
    if given["output"] is not None:
        return
    for name in ("overwrite", "picture", "report", "formats"):
        if given[name]:
            spelled = "format" if name == "formats" else name
            raise click.UsageError(f"--{spelled} needs a folder to write to: give -o DIR")
