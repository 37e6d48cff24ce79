"""What a user may wish of a split: options that `split` and `compare` share, and what they mean."""

from __future__ import annotations

from typing import Any

import click

from sfcpart.cli.options import LEVELS, LIMIT, PAIR, SPEEDS, Names, adding, weight_option

__all__ = [
    "METHOD",
    "MethodOption",
    "check_part_count",
    "load_wish",
    "shape_wish",
    "wish_options",
]


def _methods() -> list[str]:
    """Load the names of the methods."""
    from sfcpart.methods.registry import METHODS

    return list(METHODS)


METHOD = Names("method", _methods)


class MethodOption(click.Option):
    """An option whose help names the methods there are; they are loaded only to be shown."""

    def get_help_record(self, ctx: click.Context) -> tuple[str, str] | None:
        """Put the names into the help."""
        record = super().get_help_record(ctx)
        if record is None:
            return None
        return record[0], record[1].replace("NAMES", ", ".join(_methods()))


wish_options = adding(
    click.option(
        "-n",
        "--parts",
        "n_parts",
        type=click.IntRange(min=1),
        metavar="N",
        help="Number of parts.",
    ),
    click.option(
        "--levels",
        type=LEVELS,
        metavar="AxB",
        help="Nested parts, such as 4x16: nodes, then cores.",
    ),
    click.option(
        "--tolerance",
        type=float,
        default=0.03,
        show_default=True,
        metavar="SHARE",
        help="Imbalance that graph methods, and --cuts least, may use up for a smaller cut.",
    ),
    click.option(
        "--cuts",
        type=click.Choice(["balanced", "least"]),
        default="balanced",
        show_default=True,
        help="Where methods along a curve cut it: for the least heaviest part, or, within the "
        "tolerance, to cut few faces.",
    ),
    weight_option,
    click.option(
        "--speeds",
        type=SPEEDS,
        metavar="LIST|FILE",
        help="Relative speed of each part: 48*1,16*0.5, a file of numbers, or of costs.",
    ),
    click.option(
        "--limit",
        type=LIMIT,
        metavar="SPEC:MOST",
        help="A second weight of each cell, spelled like --weight, and the most of it that a "
        "part may hold: memory:300, or 1:5000 for cells. One number, or one for each part.",
    ),
    click.option(
        "--together",
        multiple=True,
        metavar="FIELD",
        help="Never part cells with equal FIELD >= 0.",
    ),
    click.option(
        "--pairs",
        type=click.Path(),
        metavar="FILE",
        help="Never part the two cells in each line of FILE (text or .npy, cells from 0).",
    ),
    click.option(
        "--periodic",
        type=PAIR,
        multiple=True,
        metavar="A:B",
        help="Never part the cells on either side of two boundary groups.",
    ),
    click.option(
        "--face-weight",
        type=click.Choice(["count", "measure"]),
        default="count",
        show_default=True,
        help="What graph methods keep small: how many faces are cut, or how much they measure.",
    ),
    click.option("--seed", type=int, default=0, show_default=True, help="Start of random choices."),
    click.option(
        "--merge-points",
        type=float,
        metavar="TOL",
        help="Merge points nearer than TOL first: closes cracks between blocks.",
    ),
    click.option(
        "--threads",
        type=click.IntRange(min=1),
        metavar="T",
        help="Threads to use (default: all allowed).",
    ),
)
"""Adds what may be wished of the parts."""


def check_part_count(given: dict[str, Any]) -> None:
    """Settle the number of parts, before anything is loaded."""
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


def load_wish(given: dict[str, Any]) -> dict[str, Any]:
    """Return what makes work and its limits: arguments that splitting and measuring share."""
    from sfcpart.cli.inputs import read_speeds

    second, most = given["limit"] or (None, None)
    return {
        "weights": list(given["weights"]) or None,
        "speeds": read_speeds(given["speeds"], given["n_parts"]),
        "limit_weights": second,
        "limits": most,
    }


def shape_wish(given: dict[str, Any]) -> dict[str, Any]:
    """Return what else splitting takes."""
    from sfcpart.cli.inputs import read_pairs

    return {
        "tolerance": given["tolerance"],
        "cuts": given["cuts"],
        "levels": given["levels"],
        "together": list(given["together"]) or None,
        "pairs": read_pairs(given["pairs"]),
        "periodic": given["periodic"],
        "face_weight": given["face_weight"],
        "seed": given["seed"],
    }
