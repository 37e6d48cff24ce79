"""`sfcpart demo`: the main job on an invented tidal channel, without any file."""

from __future__ import annotations

from typing import Any

import click

from sfcpart.cli.options import output_options, prepare_process

__all__ = ["command"]

HELP = """Split the Skerry Channel, an invented tidal channel made on the spot; needs no file.

It runs over a rock bed with fine wall layers, round a submerged pier. Cells in the layers cost
half as much again as those in free water, those in the wake of a turbine a quarter more.

\b
Examples:
  sfcpart demo
  sfcpart demo --parts 64 -o channel
"""
NEXT = """
Next:
  open {folder}/report.html in a browser: charts, and the parts to turn
  look at {folder}/parts.png
  open {folder}/parts.vtkhdf in a viewer of VTKHDF files, coloured by `part`
  sfcpart inspect YOUR_MESH                        what is in your mesh?
  sfcpart split YOUR_MESH --parts 64 -o parts      the same for your mesh
  in your solver, rank r:  sfcpart.read_part("{folder}", r)
A partition changes the order of summation and says nothing about whether a
simulation is right."""
WRITTEN = ("parts.vtkhdf", "parts.csv", "summary.json", "parts.png", "report.html")
COLUMNS, ROWS, ACROSS = 100, 20, 20


@click.command("demo", help=HELP)
@click.option(
    "-n",
    "--parts",
    "n_parts",
    type=click.IntRange(min=1),
    default=16,
    show_default=True,
    help="Number of parts.",
)
@click.option(
    "-o",
    "--output",
    type=click.Path(),
    default="sfcpart-demo",
    show_default=True,
    metavar="DIR",
    help="Folder to write; what an earlier demo wrote there is replaced.",
)
@click.option("--threads", type=int, metavar="T", help="Threads to use (default: all allowed).")
@output_options
def command(n_parts: int, output: str, threads: int | None, **how: Any) -> None:
    """Make the mesh, split it, measure, write, print."""
    prepare_process(threads)
    from sfcpart import api
    from sfcpart.cli.console import Stages, print_json, print_written
    from sfcpart.cli.figures import print_assessment, print_verdict
    from sfcpart.mesh.channel import channel_water
    from sfcpart.report.verdict import judge

    doing = Stages(quiet=how["quiet"] or how["as_json"])
    with doing("making the Skerry Channel"):
        mesh = channel_water(COLUMNS, ROWS, n_across=ACROSS).to_mesh()
    with doing(f"splitting {mesh.n_cells:,} cells"):
        partition = api.split(mesh, n_parts, weights="work")
        assessment = api.assess(mesh, partition, weights="work")
    with doing(f"writing {output}"):
        options = {"demo": "Skerry Channel", "n_parts": n_parts, "weights": ["work"]}
        api.write_split(
            output, mesh, partition, assessment=assessment, overwrite=True, picture=True,
            report=True, title=f"Skerry Channel, {n_parts:,} parts", options=options,
        )  # fmt: skip
    if how["as_json"]:
        print_json({"output": output, "options": options, **assessment.to_json_dict()})
    elif not how["quiet"]:
        print(f"Skerry Channel: {mesh.n_cells:,} cells into {n_parts:,} parts by hilbert")
        print_verdict(judge(assessment))
        print_assessment(assessment)
        print_written(output, WRITTEN)
        print(NEXT.format(folder=output))
