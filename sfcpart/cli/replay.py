"""`sfcpart replay`: a whole run under rules that say when to re-split."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import click

from sfcpart.cli.options import (
    network_options,
    output_options,
    prepare_process,
    step_model,
    weight_option,
)
from sfcpart.cli.wishes import METHOD, MethodOption

if TYPE_CHECKING:
    from sfcpart.files.series.read import Series
    from sfcpart.resplit.replayed import Replay

__all__ = ["command"]

HELP = """Replay a run in which the work moves, under several rules for re-splitting.

SERIES is an HDF5 file (`sfcpart manual series`), a PVD file, or a folder: meshes with a cell field
of parents, or with --mesh files of weights of its cells. For each rule the predicted time of the
run, the number of re-splits, what moves, and the regret: how much longer the run takes than with
the best re-splits in hindsight. Times are those of a simple model of steps and messages.

\b
Rules (--rule, repeat for several):
  never         keep the first split
  every:N       every N frames
  threshold:X   when the imbalance is above X
  stop-at-rise  when the mean cost of a step since the last re-split rises
  clock         what sfcpart.RebalanceClock says
  best-period   every N frames with the best N for this run
  hindsight     the best frames there are

\b
Examples:
  sfcpart replay front.h5 --parts 8 --picture run.png
  sfcpart replay front.h5 -n 8 --rule never --rule threshold:0.2 --rule hindsight --csv rules.csv
  sfcpart replay weights --mesh meshes/channel_mixed.vtu -n 8 --steps 100 --json
"""


@click.command("replay", help=HELP)
@click.argument("series", type=click.Path())
@click.option("-n", "--parts", "n_parts", type=click.IntRange(min=1), required=True, metavar="N")
@click.option("--mesh", type=click.Path(), metavar="MESH", help="The one mesh of all weights.")
@click.option(
    "--parent",
    default="parent",
    show_default=True,
    metavar="FIELD",
    help="Cell field with the cell of the mesh before that each cell lies in.",
)
@click.option(
    "--steps",
    type=click.IntRange(min=1),
    metavar="N",
    help="Steps that each frame lasts (default: what the series says, else 1).",
)
@click.option(
    "--rule", "rules", multiple=True, metavar="RULE", help="A rule; several if repeated. All."
)
@click.option(
    "-m",
    "--method",
    cls=MethodOption,
    type=METHOD,
    default="hilbert",
    show_default=True,
    metavar="NAME",
    help="How to split: NAMES.",
)
@click.option("--tolerance", type=float, default=0.03, show_default=True, metavar="SHARE")
@click.option("--seed", type=int, default=0, show_default=True, help="Start of random choices.")
@weight_option
@click.option(
    "--resplit-seconds",
    type=float,
    default=0.0,
    show_default=True,
    metavar="S",
    help="Set-up of the solver after each re-split.",
)
@click.option(
    "--split-seconds",
    type=float,
    default=2e-6,
    show_default=True,
    metavar="S",
    help="Splitting and new lists, for each cell of the mean rank.",
)
@click.option(
    "--cell-bytes", type=float, metavar="B", help="Bytes that a moving cell takes along (200)."
)
@click.option("--csv", "csv_path", type=click.Path(), metavar="FILE", help="Write a row a rule.")
@click.option(
    "--picture", type=click.Path(), metavar="FILE", help="Draw imbalance over time as PNG."
)
@click.option("--report", type=click.Path(), metavar="FILE", help="Write a report page (HTML).")
@click.option("--threads", type=click.IntRange(min=1), metavar="T", help="Threads to use.")
@network_options
@output_options
def command(series: str, **given: Any) -> None:
    """Read, replay, write, print."""
    prepare_process(given["threads"])
    model = step_model(given)
    from sfcpart import api
    from sfcpart.cli.console import Stages, print_json
    from sfcpart.resplit.migration import CELL_BYTES
    from sfcpart.resplit.replayed import DEFAULT_RULES
    from sfcpart.resplit.timetable import ResplitCost

    quiet = given["quiet"] or given["as_json"]
    doing = Stages(quiet=quiet, methods=["smoothed"])
    cost = CELL_BYTES if given["cell_bytes"] is None else given["cell_bytes"]
    resplit = ResplitCost(given["resplit_seconds"], given["split_seconds"], cost)
    frames = _open(series, given)
    with doing.counted("frames", len(frames)) as progress:
        found = api.replay(
            frames,
            given["n_parts"],
            rules=given["rules"] or DEFAULT_RULES,
            method=given["method"],
            tolerance=given["tolerance"],
            seed=given["seed"],
            weights=list(given["weights"]) or None,
            step_model=model,
            resplit=resplit,
            progress=progress,
        )
    if given["csv_path"]:
        _write_csv(given["csv_path"], found)
    if given["picture"]:
        with doing(f"drawing {given['picture']}"):
            _draw(given["picture"], series, found)
    if given["report"]:
        with doing(f"writing {given['report']}"):
            _write_page(given["report"], series, found)
    if given["as_json"]:
        print_json({"series": series, **found.to_json_dict()})
    elif not given["quiet"]:
        _print(series, found)


def _open(path: str, given: dict[str, Any]) -> Series:
    """Open the series, with its mesh and steps as asked for."""
    from dataclasses import replace

    from sfcpart import api
    from sfcpart.cli.inputs import read_mesh

    mesh = None if given["mesh"] is None else read_mesh(given["mesh"])
    series = api.read_series(path, mesh=mesh, parent=given["parent"])
    steps = given["steps"]
    if steps is None:
        return series
    return replace(series, frames=lambda: (replace(frame, steps=steps) for frame in series))


def _write_csv(path: str, found: Replay) -> None:
    """Write one row a rule."""
    import csv

    from sfcpart.cli.outputs import new_file

    rows = list(found.figures())
    with new_file(path) as place, place.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, list(rows[0]), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def _draw(path: str, name: str, found: Replay) -> None:
    """Draw imbalance over time."""
    from sfcpart.cli.outputs import new_file
    from sfcpart.report.run_picture import DrawnRun, draw_run

    table = found.timetable
    runs = [
        DrawnRun(o.rule, o.path.imbalance, o.path.resplits, o.path.seconds, o.regret)
        for o in found.outcomes
    ]
    with new_file(path) as place:
        draw_run(place, runs, steps=table.steps, title=f"{name}: {table.n_parts} parts")


def _write_page(path: str, name: str, found: Replay) -> None:
    """Write the report page."""
    from sfcpart.cli.outputs import new_file
    from sfcpart.report.page import replay_page, write_page

    with new_file(path) as place:
        write_page(place, replay_page(found, title=Path(name).name))


def _print(name: str, found: Replay) -> None:
    """Print a row a rule."""
    from sfcpart.cli.console import print_table
    from sfcpart.cli.figures import print_verdict
    from sfcpart.report.numbers import counted, percent
    from sfcpart.report.verdict import judge_replay

    table = found.timetable
    least, most = int(table.n_cells.min()), int(table.n_cells.max())
    cells = counted(most, "cell") if least == most else f"{least:,} to {most:,} cells"
    steps = counted(int(table.steps.sum()), "step")
    frames = counted(table.n_frames, "frame")
    print(f"{name}: {frames}, {steps}, {cells}, {counted(table.n_parts, 'part')}")
    print_verdict(judge_replay(found))
    rows = [
        [
            row["rule"] if row["period"] is None else f"{row['rule']}: {row['period']}",
            f"{row['seconds']:.4g}",
            f"{row['resplit_seconds']:.3g}",
            f"{row['n_resplits']:,}",
            f"{row['moved_bytes'] / 1e6:,.1f}",
            percent(row["mean_imbalance"]),
            percent(row["regret"]),
        ]
        for row in found.figures()
    ]
    heads = ["rule", "seconds", "re-splitting", "re-splits", "MB moved", "imbalance", "regret"]
    print_table(heads, rows)
    print(
        f"\nWith every step as short as its mean rank: {found.balanced_seconds:.4g} s. Times are "
        "predicted\n(model); the first split, which all rules share, is left out."
    )
