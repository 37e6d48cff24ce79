"""`sfcpart split`: the main job, from a mesh file to a folder a solver loads."""

from __future__ import annotations

from typing import Any

import click

from sfcpart.cli.options import (
    LEVELS,
    LIMIT,
    PAIR,
    SPEEDS,
    Names,
    mesh_argument,
    network_options,
    output_options,
    set_threads,
    step_model,
    weight_option,
)

__all__ = ["command"]

HELP = """Divide MESH into parts of equal work with little to exchange.

MESH is any file that meshio reads, VTKHDF, or a file of faces (.h5). Without -o the figures are
printed and nothing is written.

\b
Examples:
  sfcpart split meshes/channel_mixed.vtu --parts 8 -o parts
  sfcpart split meshes/channel_section.msh -n 4 -o parts --periodic inflow:outflow --picture
  sfcpart split meshes/channel_mixed.vtu --levels 2x4 -o parts --weight work
  sfcpart split meshes/channel_mixed.vtu -n 4 --speeds 2*1,2*0.5 --format vtu -o parts
  sfcpart split meshes/channel_mixed.vtu -n 8 --limit memory:300 --json

\b
Written to DIR:
  parts.vtkhdf   all parts, ghost cells marked, global ids, exchange lists for the solver
  parts.csv      figures of each part
  summary.json   versions, options, digest of the input, all figures

A partition changes the order of summation, hence the last digits of a parallel run; it says
nothing about whether a simulation is right.
"""


def _methods() -> list[str]:
    """Load the names of the methods."""
    from sfcpart.methods.registry import METHODS

    return list(METHODS)


@click.command("split", help=HELP)
@mesh_argument
@click.option(
    "-n", "--parts", "n_parts", type=click.IntRange(min=1), metavar="N", help="Number of parts."
)
@click.option(
    "-o", "--output", type=click.Path(), metavar="DIR", help="Folder to write, new or empty."
)
@click.option("--overwrite", is_flag=True, help="Replace what an earlier run wrote to DIR.")
@click.option(
    "-m",
    "--method",
    type=Names("method", _methods),
    metavar="NAME",
    default="hilbert",
    show_default=True,
    help="How to split: hilbert, morton or rows (along a curve), or a graph method.",
)
@click.option(
    "--tolerance",
    type=float,
    default=0.03,
    show_default=True,
    metavar="SHARE",
    help="Imbalance that graph methods may use up for a smaller cut.",
)
@weight_option
@click.option(
    "--speeds",
    type=SPEEDS,
    metavar="LIST|FILE",
    help="Relative speed of each part: 48*1,16*0.5 or a file of numbers.",
)
@click.option(
    "--limit",
    type=LIMIT,
    metavar="SPEC:MOST",
    help="A second weight of each cell, spelled like --weight, and the most of it that a part may "
    "hold: memory:300, or 1:5000 for cells. One number, or one for each part.",
)
@click.option(
    "--levels", type=LEVELS, metavar="AxB", help="Nested parts, such as 4x16: nodes, then cores."
)
@click.option(
    "--together", multiple=True, metavar="FIELD", help="Never part cells with equal FIELD >= 0."
)
@click.option(
    "--pairs",
    type=click.Path(),
    metavar="FILE",
    help="Never part the two cells in each line of FILE (text or .npy, cells from 0).",
)
@click.option(
    "--periodic",
    type=PAIR,
    multiple=True,
    metavar="A:B",
    help="Never part the cells on either side of two boundary groups.",
)
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
@click.option(
    "--merge-points",
    type=float,
    metavar="TOL",
    help="Merge points nearer than TOL first: closes cracks between blocks.",
)
@click.option("--seed", type=int, default=0, show_default=True, help="Start of random choices.")
@click.option("--threads", type=int, metavar="T", help="Threads to use (default: all allowed).")
@network_options
@output_options
def command(**given: Any) -> None:
    """Parse, split, write, print."""
    quiet, as_json = given.pop("quiet"), given.pop("as_json")
    _check(given)
    set_threads(given.pop("threads"))
    model = step_model(given)
    from sfcpart.cli.split_job import SplitJob

    job = SplitJob(given, step_model=model, quiet=quiet or as_json)
    job.run()
    job.report(as_json=as_json, quiet=quiet)


def _check(given: dict[str, Any]) -> None:
    """Refuse options that contradict each other, before anything is loaded."""
    levels, n_parts = given["levels"], given["n_parts"]
    if levels is None and n_parts is None:
        raise click.UsageError("how many parts? give --parts N or --levels AxB")
    product = 1
    for count in levels or (n_parts,):
        product *= count
    if n_parts is not None and product != n_parts:
        spelled = "x".join(map(str, levels))
        raise click.UsageError(f"--levels {spelled} makes {product} parts, --parts asks {n_parts}")
    given["n_parts"] = product
    if given["output"] is None:
        for name in ("overwrite", "picture", "formats"):
            if given[name]:
                spelled = "format" if name == "formats" else name
                raise click.UsageError(f"--{spelled} needs a folder to write to: give -o DIR")
    if given["threads"] is not None and given["threads"] < 1:
        raise click.UsageError(f"--threads is {given['threads']}; wanted at least 1")
