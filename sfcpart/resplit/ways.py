"""The ways to split again, by name: every one is a function from a task to parts.

The function is imported on first use: the table alone loads no kernel.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from importlib import import_module
from types import MappingProxyType
from typing import TYPE_CHECKING, cast

if TYPE_CHECKING:
    from sfcpart.dtypes import Int32Array
    from sfcpart.resplit.task import Task

__all__ = ["AUTO", "WAYS", "Way"]

AUTO = "auto"
"""Not a way of its own: several are tried, the least predicted total time wins."""


@dataclass(frozen=True)
class Way:
    """A way to split again.

    Attributes
    ----------
    name : str
    home : str
        Module under `sfcpart.resplit` and function, as "module:function".
    needs_graph : bool
        Whether it asks for the cell graph, whatever the method.
    summary : str
        One line for help texts.
    """

    name: str
    home: str
    needs_graph: bool
    summary: str

    def run(self, task: Task) -> Int32Array:
        """Return the new part of each local cell, (n_local,) int32."""
        module, _, function = self.home.partition(":")
        split = getattr(import_module(f"sfcpart.resplit.{module}"), function)
        return cast("Int32Array", split(task))


WAYS: Mapping[str, Way] = MappingProxyType(
    {
        way.name: way
        for way in (
            Way(
                name="shift",
                home="shift:shift",
                needs_graph=False,
                summary="shift the cuts along the curve; the least moved weight of all such splits",
            ),
            Way(
                name="smooth",
                home="smooth:priced_smoothing",
                needs_graph=True,
                summary="smooth from the old split, with a price on moving",
            ),
            Way(
                name="scratch",
                home="scratch:scratch",
                needs_graph=False,
                summary="split from scratch with a method, then name the parts to move the least",
            ),
        )
    }
)
