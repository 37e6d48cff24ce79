"""Options that several verbs share, and how their values are spelled."""

from __future__ import annotations

import os
from collections.abc import Callable
from typing import TYPE_CHECKING, Any, TypeVar

import click

from sfcpart.cli.ranks import share_threads

if TYPE_CHECKING:
    from sfcpart.measure.step_model import StepModel

    ParamType = click.ParamType[Any]
else:
    ParamType = click.ParamType  # generic only since click 8.2

__all__ = [
    "LEVELS",
    "LIMIT",
    "NAMED",
    "PAIR",
    "SPEEDS",
    "Names",
    "adding",
    "mesh_argument",
    "network_options",
    "output_options",
    "prepare_process",
    "step_model",
    "weight_option",
]

Function = TypeVar("Function", bound=Callable[..., Any])


def _numbers(text: str) -> list[float]:
    """Read 3,2*1.5 as 3, 1.5, 1.5; return nothing if it is no list of numbers."""
    numbers: list[float] = []
    for piece in text.split(","):
        count, star, number = piece.rpartition("*")
        try:
            numbers += [float(number)] * (int(count) if star else 1)
        except ValueError:
            return []
    return numbers


class Levels(ParamType):
    """Numbers joined by x, such as 4x16."""

    name = "levels"

    def convert(self, value: Any, param: Any, ctx: Any) -> tuple[int, ...]:
        """Split at the x."""
        if isinstance(value, tuple):
            return value
        pieces = str(value).lower().split("x")
        if not all(piece.isdigit() and int(piece) > 0 for piece in pieces):
            self.fail(f"{value!r} is no list of counts; wanted such as 4x16", param, ctx)
        return tuple(int(piece) for piece in pieces)


class Speeds(ParamType):
    """Speeds in turn with how many parts have each: 48*1.0,16*0.5; or a file of numbers."""

    name = "speeds"

    def convert(self, value: Any, param: Any, ctx: Any) -> Any:
        """Return a list of speeds, or the path of a file."""
        if isinstance(value, list) or os.path.exists(value):  # noqa: PTH110 - no Path at start
            return value
        speeds = _numbers(str(value))
        if not speeds:
            wanted = "wanted such as 48*1,16*0.5"
            self.fail(f"{value!r} is no file and no list of speeds; {wanted}", param, ctx)
        return speeds


class Limit(ParamType):
    """A specification of weights and the most of it a part may hold: memory:300, 1:5000."""

    name = "limit"

    def convert(self, value: Any, param: Any, ctx: Any) -> tuple[str, list[float] | float]:
        """Split at the last colon; several numbers are one for each part."""
        if isinstance(value, tuple):
            return value
        spec, _, most = str(value).rpartition(":")
        numbers = _numbers(most)
        if not spec or not numbers:
            self.fail(f"{value!r} is no limit; wanted such as memory:300 or 1:5000", param, ctx)
        return spec, numbers if len(numbers) > 1 else numbers[0]


class Pair(ParamType):
    """Two names or a name and a number, joined by a colon."""

    name = "pair"

    def convert(self, value: Any, param: Any, ctx: Any) -> tuple[str, str]:
        """Split at the last colon."""
        if isinstance(value, tuple):
            return value
        first, _, second = str(value).rpartition(":")
        if not first or not second:
            self.fail(f"{value!r} is not two things joined by a colon", param, ctx)
        return first, second


class Named(ParamType):
    """A name and what it stands for, joined by the first colon (paths may hold more of them)."""

    name = "named"

    def convert(self, value: Any, param: Any, ctx: Any) -> tuple[str, str]:
        """Split at the first colon."""
        if isinstance(value, tuple):
            return value
        first, _, rest = str(value).partition(":")
        if not first or not rest:
            self.fail(f"{value!r} is no name and thing joined by a colon", param, ctx)
        return first, rest


class Names(ParamType):
    """One of a table that is loaded only when a value is checked or completed."""

    def __init__(self, name: str, load: Callable[[], list[str]]) -> None:
        self.name = name
        self.load = load

    def convert(self, value: Any, param: Any, ctx: Any) -> str:
        """Check against the table."""
        names = self.load()
        if value not in names:
            self.fail(f"unknown {self.name} {value!r}; known: {', '.join(names)}", param, ctx)
        return str(value)

    def shell_complete(self, ctx: Any, param: Any, incomplete: str) -> list[Any]:
        """Offer the names that begin alike."""
        from click.shell_completion import CompletionItem

        return [CompletionItem(name) for name in self.load() if name.startswith(incomplete)]


LEVELS, SPEEDS, LIMIT, PAIR = Levels(), Speeds(), Limit(), Pair()
NAMED = Named()


class NetworkName(Names):
    """A network known by name, or the file of a measured one."""

    def convert(self, value: Any, param: Any, ctx: Any) -> str:
        """Pass the path of a file, check anything else against the table."""
        if os.path.isfile(value):  # noqa: PTH113 - no Path at start
            return str(value)
        return super().convert(value, param, ctx)


def _networks() -> list[str]:
    """Load the names of the networks."""
    from sfcpart.measure.step_model import NETWORKS

    return list(NETWORKS)


def adding(*options: Callable[[Any], Any]) -> Callable[[Function], Function]:
    """Return a decorator that adds several options to a command, shown in this order."""

    def add(function: Function) -> Function:
        for option in reversed(options):
            function = option(function)
        return function

    return add


def mesh_argument(function: Function) -> Function:
    """Add the argument MESH."""
    return click.argument("mesh", type=click.Path())(function)


output_options = adding(
    click.option("--json", "as_json", is_flag=True, help="Print JSON and nothing else."),
    click.option(
        "-q", "--quiet", is_flag=True, help="Print no figures and no progress; errors still are."
    ),
)
"""Adds --json and --quiet."""


weight_option = click.option(
    "-w",
    "--weight",
    "weights",
    multiple=True,
    metavar="SPEC",
    help="Work of each cell; several multiply. A cell field (work), a table by kind of cell "
    "(tetra=1,other=2) or by region (zone:1=1,2=4,other=1), a mix of cells and faces "
    "(cell=1,face=0.25), products (work*tetra=1,other=2), or a file of costs (costs.json).",
)


network_options = adding(
    click.option(
        "--network",
        type=NetworkName("network", _networks),
        metavar="NAME|FILE",
        default="infiniband-edr",
        show_default=True,
        help="Network of the predicted step time: gigabit-ethernet, infiniband-fdr, "
        "infiniband-edr, infiniband-hdr, infiniband-ndr, shared-memory; or what `sfcpart network` "
        "wrote.",
    ),
    click.option("--latency", type=float, metavar="S", help="Own seconds a message."),
    click.option("--bandwidth", type=float, metavar="B/S", help="Own bytes a second."),
    click.option(
        "--cell-seconds",
        type=float,
        metavar="S",
        default=1e-6,
        show_default=True,
        help="Work of a mean cell in one step.",
    ),
    click.option(
        "--bytes-per-halo-cell",
        type=float,
        metavar="B",
        default=40.0,
        show_default=True,
        help="Bytes sent for a halo cell in one exchange.",
    ),
    click.option(
        "--exchanges",
        type=float,
        metavar="N",
        default=5.0,
        show_default=True,
        help="Halo exchanges in one step.",
    ),
)
"""Adds the numbers of the step model."""


def step_model(given: dict[str, Any]) -> StepModel:
    """Take the network options out of the given ones and make a model of them."""
    from sfcpart.measure.step_model import NETWORKS, StepModel

    network = given.pop("network")
    if network not in NETWORKS:
        from sfcpart.api.network import read_network

        network = read_network(network)
    names = ("latency", "bandwidth", "cell_seconds", "bytes_per_halo_cell", "exchanges")
    return StepModel.from_preset(network, **{name: given.pop(name) for name in names})


def prepare_process(threads: int | None) -> None:
    """Fix the number of threads, and load the compiler before anything else needs it."""
    if threads is not None:
        os.environ["SFCPART_THREADS"] = str(threads)
    share_threads()
    from sfcpart.kernels._jit import load_for_us_alone

    load_for_us_alone()
