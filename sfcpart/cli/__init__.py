"""The command line: one module a verb; parse, call `sfcpart.api`, print. No algorithm lives here.

Nothing but the standard library's cheapest modules is imported at start, and of those as few as
possible: the verbs, and all heavy libraries behind them, are loaded when they are called.
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from typing import NoReturn

__all__ = ["main"]


def main(arguments: Sequence[str] | None = None) -> NoReturn:
    """Run the command line and leave the process with one of the documented exit codes."""
    from sfcpart.cli.run import run

    sys.exit(run(sys.argv[1:] if arguments is None else arguments))
