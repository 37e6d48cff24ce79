"""`sfcpart fit-weights`: what cells cost, and how fast ranks are, from measured seconds."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from sfcpart.cli.options import output_options

if TYPE_CHECKING:
    from collections.abc import Mapping

    from sfcpart.dtypes import FloatArray
    from sfcpart.files.timings import Timing
    from sfcpart.weights.fitted import WeightFit

__all__ = ["command"]

HELP = """Fit what one cell of each class costs to the seconds that ranks took.

SECONDS are files of what each rank computed in one or more steps, without waiting for others
(CSV, .npy, .npz, HDF5: `sfcpart manual costs`). What each rank held is counted from --mesh with
--parts (or --field), one for each file, by kinds of cells, faces or regions (--by, repeat for
sums); or it is in tables (--counts), or beside the seconds. Costs are never negative. With several
partitions, speeds of ranks are fitted too. The file of costs stands wherever weights do.

\b
Examples:
  sfcpart fit-weights measured.csv -o costs.json
  sfcpart fit-weights times.csv --counts counts.csv --json
  sfcpart fit-weights times.csv --mesh meshes/channel_mixed.vtu --parts parts --by cell --by face
  sfcpart split meshes/channel_mixed.vtu -n 8 --weight costs.json
"""


@click.command("fit-weights", help=HELP)
@click.argument("seconds", type=click.Path(), nargs=-1, required=True)
@click.option("--mesh", type=click.Path(), metavar="MESH", help="Mesh that was split.")
@click.option(
    "--parts",
    multiple=True,
    type=click.Path(),
    metavar="FILE|FOLDER",
    help="What rank held which cell: integers, or a folder that split wrote. One a partition.",
)
@click.option(
    "--field", "fields", multiple=True, metavar="NAME", help="The same from a cell field of MESH."
)
@click.option(
    "--by",
    multiple=True,
    metavar="CLASS",
    help="What to count: kind, cell, face, rank (a cost of each rank whatever it holds), a cell "
    "field of classes, sum:FIELD (an amount). Repeat for several. Default: kind.",
)
@click.option(
    "--counts",
    multiple=True,
    type=click.Path(),
    metavar="FILE",
    help="Counts as a table: a row a rank, a column a class. One a partition.",
)
@click.option(
    "--speeds",
    type=click.Choice(["auto", "fit", "alike"]),
    default="auto",
    show_default=True,
    help="Fit speeds of ranks, take them as alike, or as the data tell.",
)
@click.option("-o", "--output", type=click.Path(), metavar="FILE.json", help="Write the costs.")
@output_options
def command(seconds: tuple[str, ...], **given: Any) -> None:
    """Read, count, fit, write, print."""
    _check_sources(given)
    from sfcpart import api
    from sfcpart.cli.console import Stages, print_json
    from sfcpart.files.timings import read_timings

    quiet = given["quiet"] or given["as_json"]
    doing = Stages(quiet=quiet)
    with doing("reading"):
        timings = [timing for path in seconds for timing in read_timings(path)]
        counts = _counts(timings, given)
    with doing("fitting"):
        fit = api.fit_weights([t.seconds for t in timings], counts, speeds=given["speeds"])
    if given["output"]:
        api.write_costs(given["output"], fit)
    if given["as_json"]:
        print_json(fit.to_json_dict())
    elif not given["quiet"]:
        _print(fit, given["output"])


def _check_sources(given: dict[str, Any]) -> None:
    """Refuse counts from two places, before anything is loaded."""
    parts = len(given["parts"]) + len(given["fields"])
    if given["mesh"] and given["counts"]:
        raise click.UsageError("give either --mesh with --parts, or --counts")
    if bool(given["mesh"]) != bool(parts):
        raise click.UsageError("--mesh goes with --parts or --field: which rank held which cell?")
    if given["parts"] and given["fields"]:
        raise click.UsageError("give --parts or --field, not both: their order would be unclear")
    if given["by"] and not given["mesh"]:
        raise click.UsageError("--by counts cells of --mesh; give it with --parts")


def _counts(timings: list[Timing], given: dict[str, Any]) -> list[Mapping[str, FloatArray]]:
    """Return a table of counts for each partition, wherever they are."""
    from sfcpart.errors import InputError
    from sfcpart.files.timings import read_counts

    if given["mesh"]:
        tables: list[Mapping[str, FloatArray]] = _counted(given)
    elif given["counts"]:
        tables = [read_counts(path) for path in given["counts"]]
    else:
        tables = [timing.counts for timing in timings]
        if not all(tables):
            raise InputError(
                "the files of seconds hold no counts; give --mesh with --parts, or --counts"
            )
    if len(tables) != len(timings):
        raise InputError(
            f"seconds of {len(timings)} partitions and counts of {len(tables)}; wanted one for each"
        )
    return tables


def _counted(given: dict[str, Any]) -> list[Mapping[str, FloatArray]]:
    """Count the cells of the mesh in every partition."""
    from sfcpart import api
    from sfcpart.cli.inputs import partition_from_field, partition_from_path, read_mesh

    mesh = read_mesh(given["mesh"])
    parts = [partition_from_path(path, mesh.n_cells) for path in given["parts"]]
    parts += [partition_from_field(mesh, name) for name in given["fields"]]
    by = list(given["by"]) or ["kind"]
    tables = [api.class_counts(mesh, partition, by=by) for partition in parts]
    return list(tables)


def _print(fit: WeightFit, output: str | None) -> None:
    """Print a row a class, the speeds, and the notes."""
    from sfcpart.cli.console import print_table
    from sfcpart.cli.figures import counted, percent

    rows = counted(fit.n_rows, "rank") + " with cells, " + counted(fit.n_steps, "step")
    left = "" if fit.residual != fit.residual else f", {percent(fit.residual)} left unexplained"
    print(f"{rows}{left}\n")
    least = min((cost for cost in fit.cost.tolist() if cost > 0), default=1.0)
    table = [
        [name, f"{cost:.4g}", "-" if error != error else f"{error:.2g}", f"{cost / least:.3g}"]
        for name, cost, error in zip(
            fit.classes, fit.cost.tolist(), fit.standard_error.tolist(), strict=True
        )
    ]
    print_table(["class", "seconds a step", "error", "times least"], table)
    if fit.speed is not None:
        slow, fast = int(fit.speed.argmin()), int(fit.speed.argmax())
        print(
            f"\nspeeds: rank {slow} is slowest ({fit.speed[slow]:.3f}), rank {fast} fastest "
            f"({fit.speed[fast]:.3f}); the mean rank is 1"
        )
    for text in fit.notes:
        print(f"\nnote: {text}")
    if output:
        print(f"\nwrote {output}; use it as --weight {output}")
