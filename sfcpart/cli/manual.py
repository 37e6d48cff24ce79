"""`sfcpart manual`: the pages shipped with the package."""

from __future__ import annotations

import sys

import click

__all__ = ["command"]


@click.command("manual")
@click.argument("page", required=False)
def command(page: str | None) -> None:
    """Print a page of the manual; without PAGE, list the pages.

    \b
    Examples:
      sfcpart manual
      sfcpart manual figures
    """  # noqa: D301 - the mark is click's
    from sfcpart.cli.console import console, print_pairs
    from sfcpart.manual import PAGES, read_page

    if page is None:
        print_pairs(list(PAGES.items()))
        return
    text = read_page(page)
    if not sys.stdout.isatty():
        click.echo(text, nl=False)
        return
    from rich.markdown import Markdown

    console().print(Markdown(text))
