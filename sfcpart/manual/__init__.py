"""The pages behind `sfcpart manual`: Markdown shipped with the package, or made of its tables."""

from __future__ import annotations

from importlib.resources import files

from sfcpart.errors import InputError

__all__ = ["PAGES", "read_page"]

PAGES: dict[str, str] = {
    "clock": "re-splitting inside a running solver: when, in a few lines",
    "costs": "true weights from measured seconds: classes of cells, speeds, the file of costs",
    "figures": "every figure of a report: unit, meaning, bounds, the model of a step",
    "in_a_solver": "splitting, halo exchange and migration inside a running solver, with a program",
    "install": "on a laptop, and on a cluster with its own MPI",
    "parts_file": "the file of parts, for those who write a solver's reader",
    "rebalance": "when the work moves: ways to split again, meshes that changed, lists of moves",
    "reading": "which mesh files are read, how, and what is refused",
    "recipes": "five jobs from begin to end: split, balance, restart, compare, split again",
    "series": "replaying a run in which the work moves: series of frames, rules, times",
}
"""Pages and what they hold."""


def read_page(name: str) -> str:
    """Return a page as Markdown.

    Parameters
    ----------
    name : str
        One of `PAGES`.

    Raises
    ------
    InputError
        If there is no such page.

    Examples
    --------
    >>> read_page("figures").splitlines()[0]
    '# The figures of a partition'
    """
    if name not in PAGES:
        raise InputError(f"there is no page {name!r}; there are {', '.join(PAGES)}")
    if name == "figures":
        from sfcpart.manual.figures_page import page

        return page()
    return files("sfcpart.manual").joinpath(f"{name}.md").read_text(encoding="utf-8")
