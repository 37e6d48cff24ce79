"""`sfcpart assess`: measure a partition that is there already, wherever it comes from."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from sfcpart.cli.options import (
    LIMIT,
    SPEEDS,
    mesh_argument,
    network_options,
    output_options,
    prepare_process,
    step_model,
    weight_option,
)

if TYPE_CHECKING:
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition
    from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["command"]

HELP = """Measure a partition of MESH, wherever it comes from.

The part of each cell is taken from a cell field (--field) or from PARTS: a text or .npy file with
one integer a cell in the order of MESH, or a folder that `sfcpart split` wrote.

\b
Examples:
  sfcpart assess meshes/turbine.vtu --field body
  sfcpart assess meshes/pier_shell.vtk --field sheet --json
  sfcpart assess meshes/channel_mixed.vtu parts
  sfcpart assess meshes/channel_mixed.vtu cell_part.npy --csv parts.csv --report report.html
"""


@click.command("assess", help=HELP)
@mesh_argument
@click.argument("parts", type=click.Path(), required=False)
@click.option("--field", metavar="NAME", help="Cell field of MESH that holds the part.")
@weight_option
@click.option(
    "--speeds", type=SPEEDS, metavar="LIST|FILE", help="Relative speed of each part, as in split."
)
@click.option(
    "--limit",
    type=LIMIT,
    metavar="SPEC:MOST",
    help="A second weight of each cell and the most of it that a part may hold, as in split.",
)
@click.option("--csv", "csv_path", type=click.Path(), metavar="FILE", help="Write a row a part.")
@click.option("--picture", type=click.Path(), metavar="FILE", help="Write a picture (PNG).")
@click.option("--report", type=click.Path(), metavar="FILE", help="Write a report page (HTML).")
@click.option("--threads", type=int, metavar="T", help="Threads to use (default: all allowed).")
@network_options
@output_options
def command(mesh: str, parts: str | None, **given: Any) -> None:
    """Read mesh and parts, measure, print."""
    if (parts is None) == (given["field"] is None):
        raise click.UsageError("which parts? give either --field NAME or a file or folder of parts")
    prepare_process(given["threads"])
    model = step_model(given)
    second, most = given["limit"] or (None, None)
    from sfcpart import api
    from sfcpart.cli.console import Stages
    from sfcpart.cli.inputs import read_speeds
    from sfcpart.cli.ranks import once, read_held, whole_of

    doing = Stages(quiet=given["quiet"] or given["as_json"])
    with doing(f"reading {mesh}"):
        loaded = read_held(mesh)
        partition = _read_parts(loaded, parts, given["field"])
    with doing("measuring"):
        assessment = api.assess(
            loaded,
            partition,
            weights=list(given["weights"]) or None,
            speeds=read_speeds(given["speeds"], partition.n_parts),
            step_model=model,
            limit_weights=second,
            limits=most,
        )
    if given["csv_path"] is not None:
        once(lambda: _write_csv(given["csv_path"], assessment))
    if given["picture"] is not None or given["report"] is not None:
        shown, gathered = whole_of(loaded, [partition])
        whole = (shown, gathered[0], assessment)
    if given["picture"] is not None:
        with doing("drawing"):
            once(lambda: _draw(given["picture"], mesh, *whole))
    if given["report"] is not None:
        with doing(f"writing {given['report']}"):
            once(lambda: _write_page(given["report"], mesh, *whole))
    _report(mesh, assessment, as_json=given["as_json"], quiet=given["quiet"])


def _read_parts(mesh: Mesh | MeshSlice, parts: str | None, field: str | None) -> Partition:
    """Take the parts from a field, a file or a folder."""
    from sfcpart.cli.inputs import partition_from_field, partition_from_path
    from sfcpart.slices.mesh_slice import MeshSlice

    if isinstance(mesh, MeshSlice):
        from sfcpart.cli.sliced_parts import partition_of_slice

        return partition_of_slice(mesh, parts, field)
    if field is not None:
        return partition_from_field(mesh, field)
    assert parts is not None
    return partition_from_path(parts, mesh.n_cells)


def _write_csv(path: str, assessment: Any) -> None:
    """Write one row a part; figures that are not known stay empty, so that columns are stable."""
    from sfcpart.cli.outputs import new_file
    from sfcpart.files.parts.tables import write_part_table

    unknown = [float("nan")] * assessment.n_parts
    columns = {k: unknown if v is None else v for k, v in assessment.part.items()}
    with new_file(path) as place:
        write_part_table(place, columns)


def _draw(path: str, name: str, mesh: Any, partition: Partition, assessment: Any) -> None:
    """Write the picture."""
    from sfcpart.cli.outputs import new_file
    from sfcpart.graph import cell_graph
    from sfcpart.report.picture import draw_split

    graph = None if mesh.points is None and mesh.faces is None else cell_graph(mesh)
    figures = assessment.total
    with new_file(path) as place:
        draw_split(place, mesh, partition=partition, graph=graph, title=name, figures=figures)


def _write_page(path: str, name: str, mesh: Any, partition: Partition, assessment: Any) -> None:
    """Write the report page."""
    from sfcpart.api import graph_of
    from sfcpart.cli.outputs import new_file
    from sfcpart.report.page import split_page, write_page

    page = split_page(
        mesh, partition, assessment=assessment, graph=graph_of(mesh), title=Path(name).name
    )
    with new_file(path) as place:
        write_page(place, page)


def _report(mesh: str, assessment: Any, *, as_json: bool, quiet: bool) -> None:
    """Print the figures."""
    from sfcpart.cli.console import print_json
    from sfcpart.cli.figures import print_assessment, print_verdict
    from sfcpart.report.numbers import counted
    from sfcpart.report.verdict import judge

    if as_json:
        print_json({"mesh": mesh, **assessment.to_json_dict()})
    elif not quiet:
        total = assessment.total
        cells, parts = counted(total["n_cells"], "cell"), counted(total["n_parts"], "part")
        print(f"{mesh}: {cells} in {parts}")
        print_verdict(judge(assessment))
        print_assessment(assessment)
