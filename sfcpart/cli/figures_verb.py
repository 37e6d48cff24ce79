"""`sfcpart figures`: what every figure of a partition means."""

from __future__ import annotations

import click

__all__ = ["command"]

HELP = """Explain every figure of a partition: its key in JSON and CSV, its unit, its meaning.

\b
Examples:
  sfcpart figures
  sfcpart figures halo_cells surface_ratio
  sfcpart figures --json
"""


@click.command("figures", help=HELP)
@click.argument("names", nargs=-1, metavar="[KEY]...")
@click.option("--json", "as_json", is_flag=True, help="Print JSON and nothing else.")
def command(names: tuple[str, ...], as_json: bool) -> None:
    """Print the table of figures, or some rows of it."""
    from dataclasses import asdict

    from sfcpart.cli.console import print_json, print_pairs
    from sfcpart.measure.columns import PART_COLUMNS, RUN_COLUMNS, TOTAL_COLUMNS

    known = {column.name for column in (*PART_COLUMNS, *TOTAL_COLUMNS, *RUN_COLUMNS)}
    unknown = [name for name in names if name not in known]
    if unknown:
        raise click.UsageError(f"there is no figure {unknown[0]!r}; all: sfcpart figures")
    tables = {"part": PART_COLUMNS, "total": TOTAL_COLUMNS, "run": RUN_COLUMNS}
    chosen = {
        table: [column for column in columns if not names or column.name in names]
        for table, columns in tables.items()
    }
    if as_json:
        print_json({table: [asdict(c) for c in columns] for table, columns in chosen.items()})
        return
    titles = {"part": "Of each part", "total": "In total", "run": "Of a way to split (compare)"}
    shown = [(titles[table], columns) for table, columns in chosen.items() if columns]
    for k, (title, columns) in enumerate(shown):
        if k:
            print()
        rows = [(c.name, f"{f'[{c.unit}] ' if c.unit else ''}{c.meaning}") for c in columns]
        print_pairs(rows, title=title)
