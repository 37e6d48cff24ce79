"""`sfcpart forecast`: how far a run on a mesh will scale."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from sfcpart.cli.options import (
    mesh_argument,
    network_options,
    output_options,
    prepare_process,
    step_model,
    weight_option,
)

if TYPE_CHECKING:
    from sfcpart.scaling import Forecast

    ParamType = click.ParamType[Any]
else:
    ParamType = click.ParamType  # generic only since click 8.2

__all__ = ["command"]

HELP = """Predict how far a run on MESH will scale, along one curve order of its cells.

For each count of parts the predicted step, efficiency, halo share and memory a part; the largest
count that keeps the efficiency wished for; and how a mesh that grows with its parts would fare.

\b
Counts (--parts):
  16:4096      16, 32, ... 4096
  16:4096:9    nine counts in equal ratios
  16,24,64     these

\b
Examples:
  sfcpart forecast meshes/channel_mixed.vtu --parts 1:64
  sfcpart forecast meshes/channel_mixed.vtu --parts 1:64:9 --keep 0.9 --weight work
  sfcpart forecast meshes/kelvin_cells.vtkhdf --parts 4,8,12 --report scaling.html
  sfcpart forecast meshes/turbine.vtu -n 2:32 --cell-seconds 4e-7 --latency 2e-6 --json

Give measured numbers of your solver and network: the presets are orders of magnitude. A forecast
comes from a simple model of work and messages; what it leaves out is printed with it.
"""
HEADS = {
    "n_parts": "parts",
    "cells_max": "cells",
    "step_seconds": "step",
    "speed_up": "speed-up",
    "efficiency": "effic.",
    "exchange_share": "messages",
    "halo_share": "halo",
    "neighbours_max": "meets",
    "memory_bytes": "memory",
}


class Counts(ParamType):
    """Counts of parts: 16:4096, 16:4096:9, or 16,24,64."""

    name = "counts"

    def convert(self, value: Any, param: Any, ctx: Any) -> list[int]:
        """Spell the counts out."""
        if isinstance(value, list):
            return value
        from sfcpart.errors import InputError
        from sfcpart.scaling import ladder

        text = str(value)
        pieces = text.split(":" if ":" in text else ",")
        if not all(piece.strip().isdigit() for piece in pieces) or text.count(":") > 2:
            wanted = "wanted such as 16:4096, 16:4096:9 or 16,24,64"
            self.fail(f"{value!r} are no counts of parts; {wanted}", param, ctx)
        numbers = [int(piece) for piece in pieces]
        if ":" not in text:
            return numbers
        try:
            return ladder(numbers[0], numbers[1], rungs=numbers[2] if len(numbers) > 2 else None)
        except InputError as error:
            self.fail(f"{value!r}: {error}", param, ctx)


@click.command("forecast", help=HELP)
@mesh_argument
@click.option(
    "-n", "--parts", "n_parts", type=Counts(), required=True, metavar="COUNTS", help="As above."
)
@click.option(
    "--keep",
    type=click.FloatRange(min=0, max=1, min_open=True),
    default=0.8,
    show_default=True,
    metavar="SHARE",
    help="Efficiency that the largest count must keep.",
)
@click.option(
    "--memory-a-cell",
    type=click.FloatRange(min=0),
    default=1000.0,
    show_default=True,
    metavar="B",
    help="Bytes that the solver keeps for a cell.",
)
@weight_option
@click.option("--merge-points", type=float, metavar="TOL", help="As in split.")
@click.option("--csv", "csv_path", type=click.Path(), metavar="FILE", help="Write a row a count.")
@click.option("--report", type=click.Path(), metavar="FILE", help="Write a report page (HTML).")
@click.option("--threads", type=click.IntRange(min=1), metavar="T", help="Threads to use.")
@network_options
@output_options
def command(mesh: str, **given: Any) -> None:
    """Read, predict, write, print."""
    prepare_process(given["threads"])
    model = step_model(given)
    from sfcpart import api
    from sfcpart.cli.console import Stages, print_json
    from sfcpart.cli.inputs import read_mesh

    doing = Stages(quiet=given["quiet"] or given["as_json"], methods=["smoothed"])
    with doing(f"reading {mesh}"):
        loaded = read_mesh(mesh, merge_points=given["merge_points"])
    with doing.counted("cutting the curve", len(given["n_parts"])) as progress:
        found = api.forecast(
            loaded,
            given["n_parts"],
            keep=given["keep"],
            weights=list(given["weights"]) or None,
            step_model=model,
            memory_a_cell=given["memory_a_cell"],
            progress=progress,
        )
    if given["csv_path"]:
        _write_csv(given["csv_path"], found)
    if given["report"]:
        with doing(f"writing {given['report']}"):
            _write_page(given["report"], mesh, found)
    if given["as_json"]:
        print_json({"mesh": mesh, **found.to_json_dict()})
    elif not given["quiet"]:
        _print(mesh, found)


def _write_csv(path: str, found: Forecast) -> None:
    """Write one row a count."""
    import csv

    from sfcpart.cli.outputs import new_file

    rows = list(found.figures())
    with new_file(path) as place, place.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, list(rows[0]), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def _write_page(path: str, name: str, found: Forecast) -> None:
    """Write the report page."""
    from sfcpart.cli.outputs import new_file
    from sfcpart.report.page import forecast_page, write_page

    with new_file(path) as place:
        write_page(place, forecast_page(found, title=Path(name).name))


def _print(mesh: str, found: Forecast) -> None:
    """Print the verdict, a row a count, and what is behind it."""
    from sfcpart.cli.console import print_pairs, print_table
    from sfcpart.cli.figures import print_verdict
    from sfcpart.report.numbers import amount, counted, number, percent, seconds
    from sfcpart.report.verdict import judge_forecast

    print(f"{mesh}: {counted(found.n_cells, 'cell')}")
    print_verdict(judge_forecast(found))
    write: dict[str, Any] = {
        "step_seconds": seconds,
        "memory_bytes": amount,
        **dict.fromkeys(("efficiency", "exchange_share", "halo_share"), percent),
    }
    rows = [[write.get(key, number)(row[key]) for key in HEADS] for row in found.figures()]
    print_table(list(HEADS.values()), rows)
    model = found.step_model
    weak = found.weak[-1]
    left_out = model.to_json_dict()["leaves_out"]
    print()
    print_pairs(
        [
            (
                "weak",
                f"at {number(found.cells_a_part)} cells a part efficiency "
                f"{percent(weak.efficiency)} on {counted(weak.n_parts, 'part')}",
            ),
            (
                "model",
                f"{seconds(model.cell_seconds)} a cell, {number(model.exchanges)} exchanges of "
                f"{number(model.bytes_per_halo_cell)} bytes a halo cell, network "
                f"{model.network.name} ({model.network.source})",
            ),
            ("left out", "; ".join(left_out) if isinstance(left_out, list) else ""),
        ]
    )
