"""What the verbs print with: tables on the output, progress on a terminal's error stream.

The output is plain in pipes (no colour, 80 columns), the error stream silent there except for
notes and errors. `NO_COLOR` in the environment is respected everywhere.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from rich.console import Console

__all__ = [
    "Stages",
    "console",
    "hush",
    "note",
    "print_json",
    "print_pairs",
    "print_table",
    "print_written",
]

PIPE_WIDTH = 80


def console(*, stderr: bool = False) -> Console:
    """Return a console: as wide as the terminal, 80 columns in a pipe, no guesses of emphasis."""
    from rich.console import Console

    stream = sys.stderr if stderr else sys.stdout
    width = None if stream.isatty() else PIPE_WIDTH
    return Console(file=stream, width=width, highlight=False, soft_wrap=False, emoji=False)


_hushed: list[bool] = []


def hush() -> None:
    """Print no notes and no progress from now on: another rank does."""
    _hushed.append(True)


def note(text: str) -> None:
    """Print one line on the error stream."""
    if _hushed:
        return
    print(f"sfcpart: {text}", file=sys.stderr, flush=True)


def print_json(value: Any) -> None:
    """Print strict JSON and nothing else."""
    from sfcpart.files.parts.tables import json_text

    sys.stdout.write(json_text(value))


def print_pairs(rows: list[tuple[str, str]], *, title: str = "") -> None:
    """Print names and texts in two columns, long texts wrapped under themselves."""
    from rich.table import Table

    table = Table(box=None, show_header=False, pad_edge=False, padding=(0, 2, 0, 0))
    table.add_column(style="bold", no_wrap=True)
    table.add_column(overflow="fold")
    for name, text in rows:
        table.add_row(name, _plain(text))
    _print(title, table)


def print_table(heads: list[str], rows: list[list[str]], *, title: str = "") -> None:
    """Print a table of numbers, aligned to the right but for its first column.

    No number is ever cut short: on a narrow terminal the lines are longer than it is wide.
    """
    from rich.table import Table

    table = Table(box=None, pad_edge=False, padding=(0, 1, 0, 0), header_style="bold")
    for k, head in enumerate(heads):
        table.add_column(head, justify="right" if k else "left", no_wrap=True)
    for row in rows:
        table.add_row(*map(_plain, row))
    _print(title, table, least_width=_natural_width(heads, rows))


def print_written(place: str, names: Sequence[str]) -> None:
    """Print where the results are, in lines that fit."""
    from textwrap import wrap

    text = f"written to {place}: {', '.join(names)}"
    lines = wrap(text, PIPE_WIDTH, break_long_words=False, break_on_hyphens=False)
    print("\n" + "\n".join(lines))


def _natural_width(heads: list[str], rows: list[list[str]]) -> int:
    """Return how wide a table must be to show all of its texts."""
    from rich.cells import cell_len

    columns = zip(heads, *rows, strict=True)
    return sum(max(map(cell_len, column)) + 1 for column in columns)


def _plain(text: str) -> Any:
    """Keep square brackets and the like as they are."""
    from rich.text import Text

    return Text(text)


def _print(title: str, table: Any, *, least_width: int = 0) -> None:
    """Print a table under its title, without blanks at line ends."""
    from rich.text import Text

    out = console()
    out.width = max(out.width, least_width)
    if title:
        out.print(Text(title, style="bold"))
    if sys.stdout.isatty():
        out.print(table)
        return
    with out.capture() as captured:
        out.print(table)
    sys.stdout.write("".join(f"{line.rstrip()}\n" for line in captured.get().splitlines()))


class Stages:
    """Tells a person at a terminal what is being done and for how long; silent elsewhere."""

    def __init__(self, *, quiet: bool, methods: Sequence[str] = ("hilbert",)) -> None:
        self.quiet = quiet
        # a dumb terminal cannot redraw a line
        self.live = (
            not quiet and not _hushed and sys.stderr.isatty() and os.environ.get("TERM") != "dumb"
        )
        cold = [] if quiet else [room for room in _rooms(methods) if not _is_compiled(room)]
        if cold:
            note(f"first run: compiling (up to {20 * len(cold)} s, once)")

    @contextmanager
    def __call__(self, text: str) -> Iterator[None]:
        """Show a spinner and the time passed while the block runs."""
        with self._shown(text, None):
            yield

    @contextmanager
    def counted(self, text: str, total: int) -> Iterator[Callable[[int], None]]:
        """Show how many of `total` are done, and the time left; call the given with it."""
        with self._shown(text, total) as show:
            yield show

    @contextmanager
    def _shown(self, text: str, total: int | None) -> Iterator[Callable[[int], None]]:
        """Show a line that is redrawn, gone in the end; nothing where nobody looks."""
        if not self.live:
            yield lambda done: None
            return
        from rich.progress import Progress

        out = console(stderr=True)
        with Progress(*_columns(total), console=out, transient=True) as progress:
            task = progress.add_task(text, total=total)
            yield lambda done: progress.update(task, completed=done)


def _columns(total: int | None) -> list[Any]:
    """Return what a line of progress shows."""
    from rich import progress

    name = progress.TextColumn("{task.description}", markup=False)
    if total is None:
        return [progress.SpinnerColumn(), name, progress.TimeElapsedColumn()]
    left = progress.TimeRemainingColumn(elapsed_when_finished=True)
    return [
        progress.SpinnerColumn(),
        name,
        progress.BarColumn(20),
        progress.MofNCompleteColumn(),
        left,
        progress.TextColumn("left"),
    ]


def _rooms(methods: Sequence[str]) -> list[str]:
    """Name the rooms of kernels that methods use."""
    from sfcpart.methods.registry import METHODS

    known = [METHODS[name] for name in methods if name in METHODS]
    return ["curve", "graph"] if any(method.needs_graph for method in known) else ["curve"]


def _is_compiled(room: str) -> bool:
    """Tell whether compiled kernels of a room are on disk, or none will be needed."""
    if os.environ.get("SFCPART_COMPILE") == "0":
        return True
    import sfcpart

    kernels = Path(sfcpart.__file__).parent / "kernels"
    sources = {source.stem: source for source in (kernels / room).glob("*.py")}
    return any(_is_fresh(index, sources) for index in _compiled_files(kernels, room))


def _is_fresh(index: Path, sources: dict[str, Path]) -> bool:
    """Tell whether an index is newer than its kernel: an update leaves old ones behind."""
    source = sources.get(index.name.split(".")[0])
    return source is not None and index.stat().st_mtime >= source.stat().st_mtime


def _compiled_files(kernels: Path, room: str) -> list[Path]:
    """List the indexes of compiled kernels, where numba's documentation says that they go."""
    if os.environ.get("NUMBA_CACHE_DIR"):
        return list(Path(os.environ["NUMBA_CACHE_DIR"]).rglob("*.nbi"))
    here = list((kernels / room / "__pycache__").glob("*.nbi"))
    if here or os.access(kernels, os.W_OK):
        return here
    caches = os.environ.get("XDG_CACHE_HOME") or Path.home() / ".cache"
    return list(Path(caches, "numba").glob(f"{room}_*/*.nbi"))
