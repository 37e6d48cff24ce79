"""Bring cells to the ranks that own their parts, and sort them into exchange lists there.

How: cells travel along the curve (`CurveSlice`), hence arrive in curve order, and then to the rank
of their part with the parts that need them; that rank sorts its pairs of part and cell by counting
(`sfcpart.kernels.halo.arrange`) and sends the halo cells on to the ranks of the parts that need
them. Parts are owned in blocks of consecutive numbers.
Cost: O(local cells + halo); about 20 bytes a cell twice, and 16 a halo cell.
"""

from __future__ import annotations

from itertools import pairwise

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.curve import CurveSlice
from sfcpart.dtypes import OFFSET, PART, Array, Int32Array, Int64Array, IntArray, index_dtype
from sfcpart.halo.lists import Across, Halo
from sfcpart.halo.reach import Lists
from sfcpart.partition import Partition
from sfcpart.slices.routing import block_bounds, dealing, owner_of, take_ragged

__all__ = ["arranged"]


def arranged(
    line: CurveSlice,
    partition: Partition,
    lists: Lists,
    *,
    rank_first: Int64Array,
    layers: int,
    across: Across,
) -> Halo:
    """Return the lists of the parts that this rank owns (collective).

    Parameters
    ----------
    line : CurveSlice
        The curve through the cells.
    partition : Partition
        Part of each cell of this rank.
    lists : CSR
        Foreign parts that need each cell of this rank.
    rank_first : (size + 1,) int64
        First cell of every rank, and the number of all cells.
    layers, across
        What the lists were made with.
    """
    from sfcpart.kernels.halo import arrange

    comm, n_parts = line.comm, partition.n_parts
    first = block_bounds(n_parts, comm.size)
    low, high = int(first[comm.rank]), int(first[comm.rank + 1])
    gid, part, lists = _at_owners(line, partition.cell_part, lists, rank_first, first)
    n_pairs, order = len(lists[1]), np.arange(len(gid), dtype=gid.dtype)
    owned_indptr, halo_indptr, sent_indptr = np.zeros((3, n_parts + 1), OFFSET)
    owned, owner = np.empty_like(order), np.empty(n_pairs, PART)
    halo, send = np.empty(n_pairs, order.dtype), np.empty(n_pairs, order.dtype)
    cells = (order, part, owned_indptr, owned)
    arrange(*cells, *lists, halo_indptr, halo, owner, sent_indptr, send)
    destination = np.repeat(np.arange(n_parts, dtype=PART), np.diff(halo_indptr))
    send_indptr = _send_rows(destination, owner)
    halo, owner, halo_indptr = _to_users(gid[halo], owner, destination, first, comm)
    neighbour_indptr, neighbour, receive_indptr = _runs(halo_indptr, owner)
    arrays = {
        "owned_indptr": owned_indptr[low : high + 1] - owned_indptr[low],
        "owned": gid[owned],
        "halo_indptr": halo_indptr,
        "halo": halo,
        "neighbour_indptr": neighbour_indptr,
        "neighbour": neighbour,
        "receive_indptr": receive_indptr,
        "send_indptr": send_indptr,
        "send": send,
    }
    for array in arrays.values():
        array.flags.writeable = False
    shape = (high - low, int(layers), across)
    return Halo(*shape, **arrays, first_part=low)


def _at_owners(
    line: CurveSlice,
    cell_part: Int32Array,
    lists: Lists,
    rank_first: Int64Array,
    first: Int64Array,
) -> tuple[IntArray, Int32Array, Lists]:
    """Bring number, part and lists of cells to the owners of their parts, in curve order."""
    dtype = index_dtype(int(rank_first[-1]))
    low, high = rank_first[line.comm.rank : line.comm.rank + 2]
    gid = line.gather(np.arange(low, high, dtype=dtype))
    part = line.gather(cell_part)
    along = _along(line, lists)
    way = dealing(line.comm, owner_of(part, first))
    return way.forward(gid), way.forward(part), way.forward_ragged(*along)


def _along(line: CurveSlice, lists: Lists) -> Lists:
    """Bring the lists of local cells to the curve."""
    indptr, data = _taken(lists, line.order)
    cuts = list(pairwise(line.edge))
    size = np.concatenate(line.comm.alltoall([np.diff(indptr[a : b + 1]) for a, b in cuts]))
    came = np.concatenate(line.comm.alltoall([data[indptr[a] : indptr[b]] for a, b in cuts]))
    indptr = np.concatenate(([0], np.cumsum(size))).astype(OFFSET)
    return (indptr, came) if line.merge is None else _taken((indptr, came), line.merge)


def _taken(lists: Lists, rows: IntArray) -> Lists:
    """Return some lists in the order given; most of them are empty."""
    size = np.diff(lists[0])[rows]
    data = take_ragged(*lists, rows[np.flatnonzero(size)])[1]
    return np.concatenate(([0], np.cumsum(size))).astype(OFFSET), data


def _to_users(
    halo: IntArray, owner: Int32Array, destination: Int32Array, first: Int64Array, comm: Comm
) -> tuple[IntArray, Int32Array, Int64Array]:
    """Send halo cells to the owners of the parts that need them: by part, owner, curve order."""
    way = dealing(comm, owner_of(destination, first))
    columns: list[Array] = [way.forward(column) for column in (destination, halo, owner)]
    if np.any(columns[0][1:] < columns[0][:-1]):
        by_part = np.argsort(columns[0], kind="stable")
        columns = [column[by_part] for column in columns]
    bounds = np.arange(first[comm.rank], first[comm.rank + 1] + 1)
    return columns[1], columns[2], np.searchsorted(columns[0], bounds).astype(OFFSET)


def _runs(halo_indptr: Int64Array, owner: Int32Array) -> tuple[Int64Array, Int32Array, Int64Array]:
    """Find the runs of one owner within each part's halo: its neighbours and their rows."""
    n_halo = len(owner)
    starts = np.zeros(n_halo + 1, np.bool_)
    starts[1:-1] = owner[1:] != owner[:-1]
    starts[halo_indptr] = True
    receive_indptr = np.flatnonzero(starts).astype(OFFSET)
    neighbour_indptr = np.searchsorted(receive_indptr, halo_indptr).astype(OFFSET)
    if n_halo == 0:
        return neighbour_indptr, owner, np.zeros(1, OFFSET)
    return neighbour_indptr, owner[receive_indptr[:-1]], receive_indptr


def _send_rows(destination: Int32Array, owner: Int32Array) -> Int64Array:
    """Return the rows that each pair of an owner here and a part that needs its cells sends.

    Rows come by destination, then owner; pairs are wanted the other way, and the relation is
    symmetric: who receives also sends.
    """
    starts = np.ones(len(owner), np.bool_)
    starts[1:] = (owner[1:] != owner[:-1]) | (destination[1:] != destination[:-1])
    start = np.flatnonzero(starts)
    length = np.diff(np.append(start, len(owner)))
    mirror = np.argsort(owner[start], kind="stable")
    return np.concatenate(([0], np.cumsum(length[mirror]))).astype(OFFSET)
