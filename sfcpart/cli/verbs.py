"""The table of verbs: name, module, one line of help. A verb's module is loaded when it is used."""

from __future__ import annotations

from importlib import import_module

import click

from sfcpart import __version__
from sfcpart.cli.exits import exit_table

__all__ = ["PROGRAM", "VERBS", "sfcpart"]

PROGRAM = "sfcpart"
VERBS: dict[str, tuple[str, str]] = {
    "split": ("sfcpart.cli.split", "Divide a mesh into parts and write what a solver loads."),
    "assess": ("sfcpart.cli.assess", "Measure a partition, wherever it comes from."),
    "compare": ("sfcpart.cli.compare", "Split a mesh in several ways and measure all alike."),
    "fit-weights": (
        "sfcpart.cli.fit_weights",
        "Fit what cells cost to the seconds that ranks took.",
    ),
    "replay": ("sfcpart.cli.replay", "Replay a run in which the work moves under several rules."),
    "rebalance": (
        "sfcpart.cli.rebalance",
        "Split again when the work has moved; does it pay?",
    ),
    "forecast": ("sfcpart.cli.forecast", "Predict how far a run on a mesh will scale."),
    "network": (
        "sfcpart.cli.network",
        "Measure latency and bandwidth between the ranks of a job.",
    ),
    "inspect": ("sfcpart.cli.inspect", "Say what a mesh file holds, and what is wrong with it."),
    "demo": ("sfcpart.cli.demo", "Split an invented tidal channel; needs no file."),
    "figures": ("sfcpart.cli.figures_verb", "Explain every figure of a partition."),
    "manual": ("sfcpart.cli.manual", "Print a page of the manual: figures, files."),
    "completion": ("sfcpart.cli.completion", "Print the script that completes words in a shell."),
}


class Verbs(click.Group):
    """A group of verbs that knows their help without loading them."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """Return the verbs in the order of the table."""
        return list(VERBS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """Load the module of one verb."""
        if cmd_name not in VERBS:
            return None
        command: click.Command = import_module(VERBS[cmd_name][0]).command
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write the table of verbs into the help."""
        with formatter.section("Verbs"):
            formatter.write_dl([(name, text) for name, (_, text) in VERBS.items()])


@click.command(
    cls=Verbs,
    subcommand_metavar="VERB ...",
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 90},
    epilog="\b\nExit codes:\n" + exit_table(),
)
@click.version_option(__version__, prog_name=PROGRAM)
def sfcpart() -> None:
    """Divide a finite-volume mesh among the ranks of a parallel job.

    Cells are sorted along a Hilbert curve and cut into contiguous, equally heavy parts (or split
    by a graph method), measured, and written the way a solver loads them.

    \b
    Start here:
      sfcpart demo                                   needs no file
      sfcpart inspect MESH                           what is in it?
      sfcpart split MESH --parts 64 -o parts         the main job
      sfcpart split --help                           every option, with examples
    """  # noqa: D301 - the mark is click's
