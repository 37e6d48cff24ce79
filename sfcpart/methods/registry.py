"""The ways to split, by name: every one is a function from a problem to parts."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from types import MappingProxyType

from sfcpart.dtypes import Int32Array
from sfcpart.methods.bisection.bisect import coordinate, inertial, spectral
from sfcpart.methods.curve.along_curve import along_hilbert, along_morton, along_rows
from sfcpart.methods.graph.on_graph import multilevel, smoothed
from sfcpart.methods.problem import Problem

__all__ = ["METHODS", "Method"]


@dataclass(frozen=True)
class Method:
    """A way to split.

    Attributes
    ----------
    name : str
    run : callable
        `run(problem)` returns the part of each local cell, (n_local,) int32.
    needs_graph : bool
        Whether it asks for the cell graph.
    summary : str
        One line for help texts.
    """

    name: str
    run: Callable[[Problem], Int32Array]
    needs_graph: bool
    summary: str


METHODS: Mapping[str, Method] = MappingProxyType(
    {
        method.name: method
        for method in (
            Method(
                name="hilbert",
                run=along_hilbert,
                needs_graph=False,
                summary="contiguous chunks of the Hilbert curve, least bottleneck",
            ),
            Method(
                name="morton",
                run=along_morton,
                needs_graph=False,
                summary="contiguous chunks of the Morton (Z-order) curve; a baseline",
            ),
            Method(
                name="rows",
                run=along_rows,
                needs_graph=False,
                summary="strips of cells row after row; a baseline",
            ),
            Method(
                name="smoothed",
                run=smoothed,
                needs_graph=True,
                summary="chunks of the Hilbert curve, borders moved to where they cut less",
            ),
            Method(
                name="multilevel",
                run=multilevel,
                needs_graph=True,
                summary="multilevel partition of the cell graph; the least cut, the most time",
            ),
            Method(
                name="coordinate",
                run=coordinate,
                needs_graph=False,
                summary="recursive bisection across the longest side; a baseline",
            ),
            Method(
                name="inertial",
                run=inertial,
                needs_graph=False,
                summary="recursive bisection across the principal axis; a baseline",
            ),
            Method(
                name="spectral",
                run=spectral,
                needs_graph=True,
                summary="recursive bisection along Fiedler vectors of the cell graph; a baseline",
            ),
        )
    }
)
