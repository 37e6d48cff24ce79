"""`sfcpart network`: how long messages take between the ranks of this job."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import click

from sfcpart.cli.options import output_options

if TYPE_CHECKING:
    from sfcpart.measure.network import MessageFit, NetworkFigures

__all__ = ["command"]

HELP = """Measure latency and bandwidth between the ranks of this job.

Pairs of ranks hand messages of several sizes to and fro, on a node and across nodes. The figures
are those of seconds = latency + bytes / bandwidth; the file is what --network of split, assess
and compare takes for the predicted step time. Run it on two ranks or more, laid out as those of
the solver will be.

\b
Examples:
  mpiexec -n 4 sfcpart network -o network.json
  mpiexec -n 2 -ppn 1 sfcpart network --largest 67108864 --json
  sfcpart assess meshes/turbine.vtu --field body --network network.json
"""


@click.command("network", help=HELP)
@click.option(
    "-o",
    "--output",
    type=click.Path(dir_okay=False),
    metavar="FILE",
    help="Write the figures to FILE (JSON), in place of what was there.",
)
@click.option(
    "--largest",
    type=click.IntRange(min=64),
    metavar="BYTES",
    default=1 << 22,
    show_default=True,
    help="Size of the largest message.",
)
@output_options
def command(output: str | None, largest: int, **how: Any) -> None:
    """Measure, write, print."""
    from sfcpart.api.network import measure_network, write_network
    from sfcpart.cli.console import print_json
    from sfcpart.cli.ranks import once
    from sfcpart.comm import world

    if world().size < 2:
        raise click.UsageError("one rank has nobody to send messages to; use mpiexec -n 2 or more")
    figures = measure_network(largest=largest)
    if output is not None:
        once(lambda: write_network(output, figures))
    if how["as_json"]:
        print_json(figures.to_json_dict())
    elif not how["quiet"]:
        _report(figures, output)


def _report(figures: NetworkFigures, output: str | None) -> None:
    """Print a table of times and what was fitted."""
    from sfcpart.cli.console import print_table
    from sfcpart.cli.figures import counted

    print(f"{counted(figures.n_ranks, 'rank')} on {counted(figures.n_hosts, 'host')}\n")
    heads = ["bytes", *(f"{fit.where}, us" for fit in figures.fits)]
    sizes = figures.fits[0].n_bytes.tolist()
    rows = [
        [f"{size:,}", *(f"{fit.seconds[k] * 1e6:.2f}" for fit in figures.fits)]
        for k, size in enumerate(sizes)
    ]
    print_table(heads, rows)
    print()
    for fit in figures.fits:
        print(_line(fit))
    if output is not None:
        print(f"\nwritten to {output}: give it as --network {output}")


def _line(fit: MessageFit) -> str:
    """Describe a fit."""
    pairs = f"{fit.n_pairs} pair{'' if fit.n_pairs == 1 else 's'}"
    latency, bandwidth = fit.latency * 1e6, fit.bandwidth / 1e9
    return (
        f"{fit.where}: latency {latency:.3g} us, bandwidth {bandwidth:.3g} GB/s "
        f"({pairs}; the model is off by {fit.deviation:.0%} at most)"
    )
