"""The ways to split, by name: every one is a function from a problem to parts.

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
    from sfcpart.methods.problem import Problem

__all__ = ["METHODS", "Method"]


@dataclass(frozen=True)
class Method:
    """A way to split.

    Attributes
    ----------
    name : str
    home : str
        Module under `sfcpart.methods` and function, as "room.module:function".
    needs_graph : bool
        Whether it asks for the cell graph.
    summary : str
        One line for help texts.
    by_slices : bool
        Whether ranks need no more than their slices of the cells; otherwise rank 0 splits.
    """

    name: str
    home: str
    needs_graph: bool
    summary: str
    by_slices: bool = False

    def uses_graph(self, problem: Problem) -> bool:
        """Tell whether a run on this problem asks for the cell graph."""
        return self.needs_graph or (problem.cuts == "least" and self.home.startswith("curve."))

    def run(self, problem: Problem) -> Int32Array:
        """Return the part of each local cell, (n_local,) int32."""
        module, _, function = self.home.partition(":")
        split = getattr(import_module(f"sfcpart.methods.{module}"), function)
        return cast("Int32Array", split(problem))


METHODS: Mapping[str, Method] = MappingProxyType(
    {
        method.name: method
        for method in (
            Method(
                name="hilbert",
                home="curve.along_curve:along_hilbert",
                needs_graph=False,
                summary="contiguous chunks of the Hilbert curve, least bottleneck",
                by_slices=True,
            ),
            Method(
                name="morton",
                home="curve.along_curve:along_morton",
                needs_graph=False,
                summary="contiguous chunks of the Morton (Z-order) curve; a baseline",
                by_slices=True,
            ),
            Method(
                name="rows",
                home="curve.along_curve:along_rows",
                needs_graph=False,
                summary="strips of cells row after row; a baseline",
                by_slices=True,
            ),
            Method(
                name="smoothed",
                home="smoothing.on_slices:smoothed",
                needs_graph=True,
                summary="chunks of the Hilbert curve, borders moved to where they cut less",
                by_slices=True,
            ),
            Method(
                name="multilevel",
                home="graph.on_graph:multilevel",
                needs_graph=True,
                summary="multilevel partition of the cell graph; the least cut, the most time",
            ),
            Method(
                name="coordinate",
                home="bisection.bisect:coordinate",
                needs_graph=False,
                summary="recursive bisection across the longest side; a baseline",
            ),
            Method(
                name="inertial",
                home="bisection.bisect:inertial",
                needs_graph=False,
                summary="recursive bisection across the principal axis; a baseline",
            ),
            Method(
                name="spectral",
                home="bisection.bisect:spectral",
                needs_graph=True,
                summary="recursive bisection along Fiedler vectors of the cell graph; a baseline",
            ),
        )
    }
)
