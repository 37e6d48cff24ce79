"""Name linked numbers by the lowest of them, over ranks: connected components of few numbers.

How: labels start as the numbers themselves; in each round a label becomes the least of the labels
of its label and of its neighbours' labels, and hands that on to its label, so that paths halve
(Y. Zhang, A. Azad and Z. Hu, FastSV: a distributed-memory connected component algorithm with fast
convergence, SIAM Conference on Parallel Processing 2020, algorithm 2; from memory).
Cost: about log2 of the longest chain of linked numbers in rounds, plus two; a round sends 8 bytes
for each number and each of its neighbours on other ranks, and 32 for each label that changes, in
six exchanges and one reduction of 8 bytes.
"""

from __future__ import annotations

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import GID, Int64Array
from sfcpart.slices.routing import Dealing, dealing, owner_of

__all__ = ["lowest_linked", "lowest_of_pairs"]


def lowest_linked(
    gid: Int64Array, one: Int64Array, other_gid: Int64Array, *, first: Int64Array, comm: Comm
) -> Int64Array:
    """Return the lowest number that each of this rank's numbers is linked with (collective).

    Parameters
    ----------
    gid : (n,) int64, ascending
        Numbers in this rank's block.
    one : (m,) int64
        Rows of `gid`.
    other_gid : (m,) int64
        What each is linked with; its rank has the same link.
    first : (size + 1,) int64
        Bounds of the blocks.
    comm : Comm

    Returns
    -------
    (n,) int64

    Examples
    --------
    >>> from sfcpart.comm import run_ranks
    >>> def act(comm):  # 0 - 3 - 1, 2 alone
    ...     gid, links = [([0, 1], [(0, 3), (1, 3)]), ([2, 3], [(1, 0), (1, 1)])][comm.rank]
    ...     one, other = np.array(links).T
    ...     return lowest_linked(np.array(gid), one, other, first=np.array([0, 2, 4]), comm=comm)
    >>> [label.tolist() for label in run_ranks(2, act)]
    [[0, 0], [2, 0]]
    """
    far, far_row = np.unique(other_gid, return_inverse=True)
    far_row = far_row.reshape(-1)  # numpy 2.0 gave it the shape of the argument
    way = dealing(comm, owner_of(far, first))
    asked = np.searchsorted(gid, way.forward(far))
    label = gid.copy()
    while True:
        grand = _labels_of(label, gid, label, first, comm)
        least = grand.copy()
        np.minimum.at(least, one, way.back(grand[asked])[far_row])
        handed = _hand_on(label, least, gid, first, comm)
        new = np.minimum(np.minimum(label, least), handed)
        changed = np.array([np.count_nonzero(new != label)], np.int64)
        label = new
        if not comm.allreduce(changed)[0]:
            return label


def _labels_of(
    asked: Int64Array, gid: Int64Array, label: Int64Array, first: Int64Array, comm: Comm
) -> Int64Array:
    """Return the labels of numbers of any rank."""
    wanted, row = np.unique(asked, return_inverse=True)
    way = dealing(comm, owner_of(wanted, first))
    at = np.searchsorted(gid, way.forward(wanted))
    return way.back(label[at])[row.reshape(-1)]


def _hand_on(
    label: Int64Array, least: Int64Array, gid: Int64Array, first: Int64Array, comm: Comm
) -> Int64Array:
    """Offer each number's least to the number that is its label; return the least offered."""
    lower = least < label
    offer = np.stack([label[lower], least[lower]], axis=1)
    way: Dealing = dealing(comm, owner_of(offer[:, 0], first))
    came = way.forward(offer)
    handed = np.full(len(gid), np.iinfo(GID).max)
    np.minimum.at(handed, np.searchsorted(gid, came[:, 0]), came[:, 1])
    return handed


def lowest_of_pairs(
    pairs: Int64Array, *, first: Int64Array, comm: Comm
) -> tuple[Int64Array, Int64Array]:
    """Return this rank's numbers that occur in pairs of any rank, and the lowest linked with each.

    Parameters
    ----------
    pairs : (m, 2) int64
        Linked numbers of any block, on any rank.
    first : (size + 1,) int64
    comm : Comm

    Returns
    -------
    gid : (n,) int64, ascending
    lowest : (n,) int64

    Examples
    --------
    >>> from sfcpart.comm import SerialComm
    >>> pairs = np.array([[4, 1], [1, 3]])
    >>> found = lowest_of_pairs(pairs, first=np.array([0, 5]), comm=SerialComm())
    >>> [array.tolist() for array in found]
    [[1, 3, 4], [1, 1, 1]]
    """
    both = np.concatenate([pairs, pairs[:, ::-1]])
    held = dealing(comm, owner_of(both[:, 0], first)).forward(both)
    gid, one = np.unique(held[:, 0], return_inverse=True)
    links = (one.reshape(-1), np.ascontiguousarray(held[:, 1]))
    return gid, lowest_linked(gid, *links, first=first, comm=comm)
