"""What ranks share: points that several of them hold, and faces between their cells.

Points: each rank asks the block that a point's number falls in whether another rank holds it too.
Faces: those with all their corners on shared points are sent to a rank chosen by their smallest
corner, where equal ones meet; whoever has a face that some other rank has too is told the cells
behind it and its measure, that of its lowest cell.

Cost: 9 bytes a local point; about 60 bytes a face on the rim of a slice there, 24 back for each
neighbour found; four exchanges, a sort of the faces that meet.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import COORDINATE, GID, OFFSET, BoolArray, FloatArray, Int64Array
from sfcpart.slices.directory import cut
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import block_bounds, dealing

__all__ = ["Answers", "FaceRows", "meet_faces", "shared_points"]


def shared_points(held: MeshSlice) -> BoolArray:
    """Tell which local points another rank holds too (collective), kept on the mesh.

    Parameters
    ----------
    held : MeshSlice

    Returns
    -------
    (mesh.n_points,) bool
        Empty for a whole mesh: it shares none.

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.mesh.mesh import Mesh
    >>> from sfcpart.slices.mesh_slice import cut_mesh
    >>> points = [[0, 0], [1, 0], [0, 1], [1, 1]]
    >>> mesh = Mesh.from_arrays(points, {"triangle": [[0, 1, 2], [1, 3, 2]]})
    >>> run_ranks(2, lambda comm: shared_points(cut_mesh(mesh, comm)).tolist())
    [[False, True, True], [True, True, False]]
    """
    return held.mesh.keep("shared points", lambda: _shared_points(held))


def _shared_points(held: MeshSlice) -> BoolArray:
    """Ask the blocks of points."""
    gid = np.zeros(0, GID) if held.point_gid is None else held.point_gid
    bounds = block_bounds(held.n_points, held.comm.size)
    asked = held.comm.alltoall(cut(gid, np.searchsorted(gid, bounds).astype(OFFSET)))
    low, high = bounds[held.comm.rank : held.comm.rank + 2]
    once, twice = np.zeros((2, int(high - low)), np.bool_)
    for piece in asked:
        twice[piece - low] |= once[piece - low]
        once[piece - low] = True
    shared: BoolArray = np.concatenate(held.comm.alltoall([twice[piece - low] for piece in asked]))
    return shared


@dataclass(frozen=True, eq=False)
class FaceRows:
    """Faces of cells of this rank that may meet others; rows by cell, then face of the cell.

    Attributes
    ----------
    cell_gid : (n,) int64
    measure : (n,) float64
    indptr, corner_gid : CSR
        Distinct corners of each, ascending.
    """

    cell_gid: Int64Array
    measure: FloatArray
    indptr: Int64Array
    corner_gid: Int64Array


@dataclass(frozen=True, eq=False)
class Answers:
    """What this rank is told of its faces that other ranks have too, in any order.

    Attributes
    ----------
    row : (n,) int64
        Row of `FaceRows`; once for each cell behind the face.
    other_gid : (n,) int64
        A cell behind it; -1 where the face counts with another face of its own cell.
    measure : (n,) float64
    """

    row: Int64Array
    other_gid: Int64Array
    measure: FloatArray


def meet_faces(faces: FaceRows, comm: Comm) -> Answers:
    """Find the faces that several ranks have (collective)."""
    size = np.diff(faces.indptr)
    home = (faces.corner_gid[faces.indptr[:-1]] if len(size) else size) % comm.size
    bits = np.ascontiguousarray(faces.measure, COORDINATE).view(np.int64)
    way = dealing(comm, home)
    came = way.forward(np.stack([faces.cell_gid, bits, size], axis=1))
    corner = dealing(comm, np.repeat(home, size)).forward(faces.corner_gid)
    start = np.cumsum(way.received) - way.received
    told = _told(came, corner, np.repeat(np.arange(comm.size), way.received))
    source = np.searchsorted(start, told[:, 0], side="right") - 1
    # of several ranks that sent nothing `searchsorted` takes the last, which did send
    told[:, 0] -= start[source]
    edge = np.searchsorted(source, np.arange(comm.size + 1))
    answers = comm.alltoall([told[a:b] for a, b in pairwise(edge)])
    first = np.repeat(way.edge[:-1], [len(rows) for rows in answers])
    rows = np.concatenate(answers)
    sent = rows[:, 0] + first
    row = sent if way.order is None else way.order[sent]
    return Answers(row, rows[:, 1], np.ascontiguousarray(rows[:, 2]).view(COORDINATE))


def _told(came: Int64Array, corner: Int64Array, rank: Int64Array) -> Int64Array:
    """Return (row, cell behind it, bits of the measure) of faces of several ranks, by row."""
    size = came[:, 2]
    start = np.cumsum(size) - size
    told = [np.zeros((0, 3), np.int64)]
    for n in np.unique(size).tolist():  # equal faces have as many corners
        rows = np.flatnonzero(size == n)
        key = corner[start[rows][:, None] + np.arange(n)]
        order = np.lexsort((came[rows, 0], *key.T[::-1]))
        key, rows = key[order], rows[order]
        begins = np.ones(len(rows), np.bool_)
        begins[1:] = (key[1:] != key[:-1]).any(axis=1)
        told.append(_pair(rows, begins, came, rank[rows]))
    found = np.concatenate(told)
    return found[np.argsort(found[:, 0], kind="stable")]


def _pair(row: Int64Array, begins: BoolArray, came: Int64Array, source: Int64Array) -> Int64Array:
    """Tell the faces of runs of equal ones, by cell, the other cells of the run."""
    cell, group, begin = came[row, 0], np.cumsum(begins) - 1, np.flatnonzero(begins)
    is_met = np.minimum.reduceat(source, begin) < np.maximum.reduceat(source, begin)
    bits = came[row[begin], 1]
    same_cell = np.append(False, (cell[1:] == cell[:-1]) & ~begins[1:])
    again = np.flatnonzero(is_met[group] & same_cell)
    first = np.flatnonzero(is_met[group] & ~same_cell)
    one, other = _all_pairs(group[first])
    one, other = first[one], first[other]
    return np.concatenate(
        [
            np.stack([row[one], cell[other], bits[group[one]]], axis=1),
            np.stack([row[again], np.full(len(again), -1), bits[group[again]]], axis=1),
        ]
    )


def _all_pairs(group: Int64Array) -> tuple[Int64Array, Int64Array]:
    """Return all ordered pairs of two rows of one group; equal groups stand together."""
    begin = np.searchsorted(group, group)
    size = np.searchsorted(group, group, side="right") - begin
    one = np.repeat(np.arange(len(group)), size)
    within = np.arange(len(one)) - np.repeat(np.cumsum(size) - size, size)
    other = begin[one] + within
    return one[one != other], other[one != other]
