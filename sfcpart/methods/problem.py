"""What every way to split is given: one frozen value, checked at the gate, integers only."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field
from typing import Literal

from sfcpart.comm.base import Comm
from sfcpart.curve import CurveSlice, curve_slice
from sfcpart.dtypes import FloatArray, Int64Array
from sfcpart.graph import CellGraph
from sfcpart.weights import FaceWeight

__all__ = ["Cuts", "Problem"]

Cuts = Literal["balanced", "least"]


@dataclass(frozen=True, eq=False)
class Problem:
    """A mesh to divide, as a method sees it (all arrays are this rank's slice of the cells).

    Attributes
    ----------
    centers : (n_local, dim) float64
        Cell centres.
    first_gid : int
        Global number of this rank's first cell: slices are contiguous in file order.
    weight : (n_local,) int64 or None
        Quantised work of each cell; None means 1 each.
    weight_unit : float
        What the integer 1 of it stands for; only reports need it.
    part_speed : (n_parts,) float64
        Relative speed of each part, > 0; all ones by default.
    tolerance : float
        Allowed excess of the heaviest part over its fair share, e.g. 0.03.
    level_sizes : tuple of int
        Nested levels; their product is n_parts. (n_parts,) means one level.
    limit_weight : (n_local,) int64 or None
        A second quantised weight (memory) with `part_limit` as the most a part may hold.
    part_limit : (n_parts,) int64 or None
    limit_unit : float
        What the integer 1 of these two stands for; only messages need it.
    group : (n_local,) int64 or None
        Cells with the same non-negative number stay together; -1 = free.
    face_weight : {"count", "measure"}
        What a method that cuts the cell graph lets a cut face cost, as integers:
        `face_weights(graph.data, by=problem.face_weight)` of `sfcpart.weights`.
    cuts : {"balanced", "least"}
        What methods along a curve do with `tolerance`: nothing (the least bottleneck), or move
        their cuts to where they cut fewest faces. Other methods have no such cuts.
    seed : int
        The only source of randomness, hashed with the gid where used.
    graph : callable
        Returns the cell graph (built on first call, collective); methods without need never call
        it. Where ranks hold slices of a mesh it is a `GraphSlice`, whose rows are alike.
    comm : Comm
        The ranks that split together.
    place : callable
        `place(centers, curve=, comm=)` returns the curve through centres, `curve_slice` or one
        that knows the curve of these centres already.
    """

    centers: FloatArray
    n_parts: int
    part_speed: FloatArray
    comm: Comm
    graph: Callable[[], CellGraph]
    first_gid: int = 0
    weight: Int64Array | None = None
    weight_unit: float = 1.0
    tolerance: float = 0.03
    level_sizes: tuple[int, ...] = field(default=())
    limit_weight: Int64Array | None = None
    part_limit: Int64Array | None = None
    limit_unit: float = 1.0
    group: Int64Array | None = None
    face_weight: FaceWeight = "count"
    seed: int = 0
    cuts: Cuts = "balanced"
    place: Callable[..., CurveSlice] = curve_slice
