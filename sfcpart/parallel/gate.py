"""The gate of this room: relations of rank-local cells checked and cast."""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import Int64Array
from sfcpart.errors import InputError
from sfcpart.slices.gate import checked_gids

__all__ = ["checked_faces", "checked_graph"]


def checked_graph(indptr: ArrayLike, indices: ArrayLike, cell_gid: ArrayLike) -> Int64Array:
    """Return the neighbours of a well-formed relation."""
    n_owned = len(checked_gids(cell_gid, "cell_gid"))
    ptr, neighbours = checked_gids(indptr, "indptr"), checked_gids(indices, "indices")
    if len(ptr) != n_owned + 1:
        raise InputError(
            f"indptr has {len(ptr)} entries for {n_owned} owned cells; wanted {n_owned + 1}"
        )
    if ptr[0] != 0 or ptr[-1] != len(neighbours) or np.any(ptr[1:] < ptr[:-1]):
        raise InputError(
            f"indptr goes from {ptr[0]} to {ptr[-1]} for {len(neighbours)} indices; "
            "wanted it to rise from 0 to their number"
        )
    return neighbours


def checked_faces(face_cell_gid: ArrayLike, cell_gid: ArrayLike) -> Int64Array:
    """Return the cells of faces, each of which touches an owned cell."""
    pairs = np.asarray(face_cell_gid)
    if pairs.size == 0:
        return np.empty(0, np.int64)
    if pairs.ndim != 2 or pairs.shape[1] != 2:
        raise InputError(f"face_cell_gid has shape {pairs.shape}; wanted (n_faces, 2)")
    cells = checked_gids(pairs.reshape(-1), "face_cell_gid")
    strange = ~np.isin(cells, checked_gids(cell_gid, "cell_gid")).reshape(-1, 2).any(axis=1)
    if strange.any():
        face = int(np.flatnonzero(strange)[0])
        raise InputError(
            f"face {face} joins cells {pairs[face, 0]} and {pairs[face, 1]}, none of which this "
            "rank owns; wanted faces of owned cells only"
        )
    return cells
