"""The points of a VTKHDF grid, spread evenly over ranks, joined where partitions share them.

Points of several partitions with one `GlobalPointIds` are one point; they are then numbered by
these ids. Ids are dealt to ranks by range, and points are joined there.
Cost: each rank reads its share of the points once, and two exchanges if points are joined.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import GID, Array, FloatArray, Int64Array
from sfcpart.errors import MeshError
from sfcpart.files.meshes.assemble import as_numbers
from sfcpart.files.meshes.vtkhdf_rows import GridRows
from sfcpart.mesh.gate import check_positions
from sfcpart.slices.gate import agreed
from sfcpart.slices.routing import ask_rows, block_bounds, dealing

__all__ = ["FilePoints", "read_points"]


@dataclass(frozen=True, eq=False)
class FilePoints:
    """A rank's block of the points.

    Attributes
    ----------
    first : (size + 1,) int64
        First point of every rank, and the number of all.
    positions : (n_local, 2 or 3) float64
    fields : dict of str to (n_local, ...) array
    is_flat : bool
        Whether the third coordinates of all points on all ranks agree.
    file_first : (size + 1,) int64
        First point *in the file* of every rank.
    number : (n_in_file,) int64 or None
        Number of each of the file's points of this rank's share; None if they are numbered as
        they lie in the file.
    """

    first: Int64Array
    positions: FloatArray
    fields: dict[str, Array]
    is_flat: bool
    file_first: Int64Array
    number: Int64Array | None = None

    @property
    def n_points(self) -> int:
        """Number of all points."""
        return int(self.first[-1])

    @property
    def is_plain(self) -> bool:
        """Whether points are numbered as they lie in the file."""
        return self.number is None

    def numbers(self, in_file: Int64Array, comm: Comm) -> Int64Array:
        """Return the numbers of points by their places in the file (collective)."""
        if self.number is None:
            return in_file
        return ask_rows(comm, self.number, first=self.file_first, gid=in_file)

    def space_dim(self, dim: int) -> int:
        """Return the dimension of the centres of cells of dimension `dim`."""
        width = int(self.positions.shape[1])
        return 2 if dim == 2 and width == 3 and self.is_flat else width


def read_points(grid: GridRows, comm: Comm) -> FilePoints:
    """Read this rank's share of the points and join what is one (collective).

    Parameters
    ----------
    grid : GridRows
    comm : Comm

    Raises
    ------
    FileError, MeshError
        If rows are missing, a coordinate is not finite, or points with one id lie apart.
    """
    bounds = block_bounds(int(grid.n_points.sum()), comm.size)
    lo, hi = int(bounds[comm.rank]), int(bounds[comm.rank + 1])
    positions, fields = agreed(comm, lambda: _read(grid, lo, hi))
    ids = fields.get("GlobalPointIds")
    if grid.n_partitions > 1 and ids is not None and ids.dtype.kind in "iu":
        rows = _Rows(np.arange(lo, hi, dtype=GID), positions, fields)
        return _joined(ids.reshape(-1).astype(GID), rows, bounds, grid.path, comm)
    return FilePoints(bounds, positions, fields, _is_flat(positions, comm), bounds)


def _read(grid: GridRows, lo: int, hi: int) -> tuple[FloatArray, dict[str, Array]]:
    """Read rows of points and their fields."""
    try:
        positions = check_positions(grid.points(lo, hi), "point", first=lo)
    except MeshError as error:
        raise MeshError(f"{grid.path}: {error}") from error
    names = grid.field_names("PointData")
    return positions, {n: as_numbers(grid.field("PointData", n, lo, hi)) for n in names}


def _is_flat(positions: FloatArray, comm: Comm) -> bool:
    """Tell whether all third coordinates agree."""
    if positions.shape[1] < 3:
        return True
    low = comm.allreduce(np.array([positions[:, 2].min(initial=np.inf)]), "min")[0]
    high = comm.allreduce(np.array([positions[:, 2].max(initial=-np.inf)]), "max")[0]
    return bool(low == high)


@dataclass(frozen=True, eq=False)
class _Rows:
    """Points with their places in the file."""

    place: Int64Array
    positions: FloatArray
    fields: dict[str, Array]


def _joined(
    ids: Int64Array, rows: _Rows, bounds: Int64Array, source: str, comm: Comm
) -> FilePoints:
    """Make one point of all with the same id, numbered by ascending ids."""
    low = int(comm.allreduce(np.array([ids.min(initial=np.iinfo(GID).max)]), "min")[0])
    high = int(comm.allreduce(np.array([ids.max(initial=np.iinfo(GID).min)]), "max")[0])
    width = max(1, -(-(high - low + 1) // comm.size))
    goal = (ids.astype(np.uint64) - np.uint64(low % (1 << 64))) // np.uint64(width)
    way = dealing(comm, goal.astype(np.int64))
    came, place = way.forward(ids), way.forward(rows.place)
    positions = way.forward(rows.positions)
    # what comes is ordered by place in the file, so the first of an id is its lowest place
    unique, first, which = np.unique(came, return_index=True, return_inverse=True)
    which = which.reshape(-1)
    agreed(comm, lambda: _check_apart(positions, first, which, place, came, source))
    counts = np.concatenate(comm.allgather(np.array([len(unique)], GID)))
    new_first = np.concatenate(([0], np.cumsum(counts)))
    number = way.back(which + new_first[comm.rank])
    fields = {name: way.forward(values)[first] for name, values in rows.fields.items()}
    positions = positions[first]
    return FilePoints(new_first, positions, fields, _is_flat(positions, comm), bounds, number)


def _check_apart(
    positions: FloatArray,
    first: Array,
    which: Array,
    place: Int64Array,
    ids: Int64Array,
    source: str,
) -> None:
    """Refuse points that share an id but not their place."""
    apart = np.any(positions[first][which] != positions, axis=1)
    if apart.any():
        bad = int(np.flatnonzero(apart)[0])
        other = int(first[which[bad]])
        raise MeshError(
            f"{source}: point {place[bad]} and point {place[other]} share global id {ids[bad]}, "
            f"but lie at {positions[bad]} and {positions[other]}"
        )
