"""Improve a partition that is there: the verb `smooth`."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.errors import PartitionError
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.plan import Weights, held_of, plan_problem
from sfcpart.slices.mesh_slice import MeshSlice

if TYPE_CHECKING:
    from sfcpart.comm.base import Comm
    from sfcpart.weights import FaceWeight

__all__ = ["smooth"]


def smooth(
    mesh: Mesh | MeshSlice,
    partition: Partition | ArrayLike,
    n_parts: int | None = None,
    *,
    tolerance: float = 0.03,
    weights: Weights = None,
    speeds: ArrayLike | None = None,
    limit_weights: Weights = None,
    limits: ArrayLike | None = None,
    levels: Sequence[int] | None = None,
    together: ArrayLike | str | Sequence[str] | None = None,
    pairs: ArrayLike | None = None,
    periodic: Sequence[tuple[str, str]] = (),
    face_weight: FaceWeight = "count",
    comm: Comm | None = None,
) -> Partition:
    """Improve any partition: move its borders to where they cut less, within the balance.

    Parameters
    ----------
    mesh : Mesh, or MeshSlice
        A slice is smoothed together with those of the other ranks (`sfcpart.read_slice`).
    partition : Partition or (n_cells,) integers
        The start, 0 <= part; with several ranks the parts of this rank's cells.
    n_parts : int, optional
        Number of parts; by default that of the start. Parts that are empty in the start are filled.
    tolerance : float
        How far the heaviest part may exceed its fair share (0.03: 3 %).
    weights, speeds, limit_weights, limits, levels, together, pairs, periodic, face_weight
        As for `split`. With levels, borders move inside the parts of the upper levels only. Of a
        group that the start parts, the part of its first cell counts.
    comm : Comm, optional
        As for `split`.

    Returns
    -------
    Partition
        Of this rank's cells; the same for any number of threads and ranks. It never cuts more than
        a start that keeps balance and groups, and weighs no part more than the tolerance allows if
        moves over borders lead there.

    Raises
    ------
    PartitionError
        If the start does not fit the mesh or has parts out of range, or neither it nor what was
        made of it keeps the limits.
    InputError, WeightError
        As `split`.

    Notes
    -----
    O(n) for bounded degrees. Blocks along the curve move first, then every border between two
    parts is put where it cuts least (see `sfcpart.methods.smoothing.smooth`).

    Examples
    --------
    >>> import sfcpart
    >>> points = [[x, y] for y in range(3) for x in range(5)]
    >>> quads = [[i, i + 1, i + 6, i + 5] for i in (0, 1, 2, 3, 5, 6, 7, 8)]
    >>> mesh = sfcpart.Mesh.from_arrays(points, {"quad": quads})
    >>> better = sfcpart.smooth(mesh, [0, 1, 0, 1, 0, 0, 1, 1])
    >>> sfcpart.assess(mesh, better).total["cut_faces"]
    2
    """
    from sfcpart.methods.smoothing.on_slices import smooth_problem

    held = held_of(mesh, comm)
    start = checked_start(held, partition, n_parts)
    problem = plan_problem(
        mesh,
        start.n_parts,
        tolerance=tolerance,
        weights=weights,
        speeds=speeds,
        limit_weights=limit_weights,
        limits=limits,
        levels=levels,
        together=together,
        pairs=pairs,
        periodic=periodic,
        face_weight=face_weight,
        seed=0,
        comm=comm,
    )
    return Partition.from_array(smooth_problem(problem, start.cell_part), start.n_parts)


def checked_start(
    held: MeshSlice, partition: Partition | ArrayLike, n_parts: int | None
) -> Partition:
    """Check the start on all ranks alike (collective).

    Raises
    ------
    PartitionError
        If it has not one part a cell, or a part out of range.
    """
    error, found = None, Partition(np.zeros(0, np.int32), 1)
    try:
        found = _as_partition(partition, n_parts)
        if found.n_cells != held.n_local:
            raise PartitionError(
                f"the partition has {found.n_cells} cells, the mesh {held.n_local}; "
                "wanted one part a cell, in the mesh's order"
            )
    except PartitionError as caught:
        error = caught
    held.comm.check(error)
    most = int(held.comm.allreduce(np.array([found.n_parts], np.int64), "max")[0])
    return Partition.from_array(found.cell_part, most)


def _as_partition(parts: Partition | ArrayLike, n_parts: int | None) -> Partition:
    """Return a partition into a number of parts; a rank without cells knows of none."""
    if isinstance(parts, Partition):
        if n_parts in (None, parts.n_parts):
            return parts
        parts = parts.cell_part
    array = np.asarray(parts)
    if not array.size and n_parts is None:
        n_parts = 1
    return Partition.from_array(array.astype(np.int64) if not array.size else array, n_parts)
