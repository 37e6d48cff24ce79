"""Divide a mesh: the verb `split`."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from numpy.typing import ArrayLike

from sfcpart.errors import InputError
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.plan import Weights, plan_problem
from sfcpart.slices.mesh_slice import MeshSlice

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm
    from sfcpart.methods.problem import Cuts
    from sfcpart.weights import FaceWeight

__all__ = ["split"]


def split(
    mesh: Mesh | MeshSlice,
    n_parts: int,
    *,
    method: str = "hilbert",
    tolerance: float = 0.03,
    cuts: Cuts = "balanced",
    weights: Weights = None,
    speeds: ArrayLike | None = None,
    limit_weights: Weights = None,
    limits: ArrayLike | None = None,
    levels: Sequence[int] | None = None,
    together: ArrayLike | str | Sequence[str] | None = None,
    pairs: ArrayLike | None = None,
    periodic: Sequence[tuple[str, str]] = (),
    face_weight: FaceWeight = "count",
    seed: int = 0,
    comm: Comm | None = None,
) -> Partition:
    """Divide a mesh into parts of equal work.

    Parameters
    ----------
    mesh : Mesh, or MeshSlice
        A slice is split together with those of the other ranks (`sfcpart.read_slice`).
    n_parts : int
        Number of parts, 1 <= n_parts <= n_cells. No part is empty.
    method : str
        A name of `sfcpart.methods.registry.METHODS`.
    tolerance : float
        How far the heaviest part may exceed its fair share (0.03: 3 %) where a method can trade
        balance for a smaller cut.
    cuts : {"balanced", "least"}
        How methods along a curve choose their cuts: with the least heaviest part there is, or,
        within `tolerance`, with few faces cut (which takes the cell graph). Others ignore it.
    weights : (n_cells,) numbers, or str, or list of str, optional
        Work of each cell: numbers >= 0, or specifications (see `sfcpart.weights`), multiplied.
        1 each by default.
    speeds : (n_parts,) numbers, optional
        Relative speed of each part's rank, > 0.
    limit_weights, limits : optional
        A second weight of each cell (as `weights`; 1 each by default) and the most of it that a
        part may hold, one number or one a part: memory, for instance.
    levels : sequence of int, optional
        Nested levels such as (4, 16): nodes, then cores; their product is `n_parts`.
    together : (n_cells,) numbers, or names of cell fields, optional
        Cells with equal values stay in one part; negative numbers and NaN are free.
    pairs : (m, 2) integers, optional
        Cells that stay together two by two.
    periodic : sequence of (str, str)
        Pairs of boundary groups whose facing cells stay together.
    face_weight : {"count", "measure"}
        What methods on the cell graph keep small: the number of cut faces, or their total measure.
    seed : int
        The only source of randomness of the methods that use any.
    comm : Comm, optional
        Ranks that each hold a slice of the cells as `mesh` (and of whatever has a row a cell),
        for methods along a curve; those of a `MeshSlice`, or this process alone, by default.
        `pairs` and `periodic` need a whole mesh or a `MeshSlice`.

    Returns
    -------
    Partition
        Of this rank's cells; the same for any number of threads and ranks.

    Raises
    ------
    InputError, WeightError, PartitionError
        If something asked for is malformed or cannot be met; the message says what could.

    Notes
    -----
    Curve methods: O(n) plus one sort of the keys. A partition changes the order in which a solver
    sums; it says nothing about whether a simulation is right.

    Examples
    --------
    >>> import sfcpart
    >>> mesh = sfcpart.Mesh.from_centers([[x, y] for x in range(4) for y in range(4)])
    >>> sfcpart.split(mesh, 4).part_size().tolist()
    [4, 4, 4, 4]
    """
    from sfcpart.methods.on_one_rank import run_method
    from sfcpart.methods.registry import METHODS

    if method not in METHODS:
        raise InputError(f"method {method!r} is unknown; wanted one of {', '.join(METHODS)}")
    problem = plan_problem(
        mesh,
        n_parts,
        tolerance=tolerance,
        cuts=cuts,
        weights=weights,
        speeds=speeds,
        limit_weights=limit_weights,
        limits=limits,
        levels=levels,
        together=together,
        pairs=pairs,
        periodic=periodic,
        face_weight=face_weight,
        seed=seed,
        comm=comm,
    )
    return Partition.from_array(run_method(METHODS[method], problem), problem.n_parts)
