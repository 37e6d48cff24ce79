"""Read a mesh given by faces (`sfcpart.files.meshes.faces_file`) by slices.

Each rank reads its share of the cells and of the faces; faces then go to the ranks of their cells.
Cost: the file is read once, by all ranks together, and one exchange of the faces.
"""

from __future__ import annotations

from contextlib import ExitStack
from os import PathLike
from typing import Any

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import GID, KIND, Array, Int64Array
from sfcpart.errors import MeshError
from sfcpart.files.hdf5 import read_hdf5
from sfcpart.files.meshes.faces_file import DATASETS, checked_group, stored_numbers
from sfcpart.mesh.build import check_face_cells, check_some_cells
from sfcpart.mesh.gate import check_fields, check_positions, check_sizes
from sfcpart.mesh.kinds import VERTEX
from sfcpart.slices.gate import agreed
from sfcpart.slices.mesh_slice import MeshSlice, assemble_slice
from sfcpart.slices.routing import block_bounds, dealing, owner_of

__all__ = ["read_faces_slice"]


def read_faces_slice(path: str | PathLike[str], comm: Comm) -> MeshSlice:
    """Read this rank's slice of a mesh given by faces (collective).

    Parameters
    ----------
    path : path
        The same file on all ranks.
    comm : Comm

    Returns
    -------
    MeshSlice

    Raises
    ------
    FileError, MeshError
        As `read_faces`, on all ranks alike.
    """
    with ExitStack() as stack:
        file = agreed(comm, lambda: stack.enter_context(read_hdf5(path)))
        group = agreed(comm, lambda: checked_group(file, path))
        sizes = agreed(comm, lambda: [_n_rows(group, name, path) for name in DATASETS])
        first = block_bounds(sizes[2], comm.size)
        face_first = block_bounds(sizes[0], comm.size)
        packed = agreed(comm, lambda: _rows_read(group, path, first, face_first, comm.rank))
    cell, measure = packed.pop("face_cell"), packed.pop("face_measure")
    owner = owner_of(cell.astype(GID), first)  # -1 for the boundary
    twice = (owner[:, 1] >= 0) & (owner[:, 1] != owner[:, 0])
    goal = np.concatenate([owner[:, 0], owner[twice, 1]])
    number = np.concatenate([np.arange(len(cell)), np.flatnonzero(twice)])
    way = dealing(comm, goal)
    in_order = np.argsort(way.forward(number + face_first[comm.rank]), kind="stable")
    packed["face_cell"] = way.forward(cell[number].astype(GID))[in_order]
    packed["face_measure"] = way.forward(measure[number])[in_order]
    dim = int(packed["given_center"].shape[1])
    about = {"n_points": 0, "dim": dim, "space_dim": dim, "groups": []}
    return assemble_slice(packed, about, first, comm)


def _n_rows(group: Any, name: str, path: str | PathLike[str]) -> int:
    """Return the number of rows of a dataset of numbers."""
    shape = stored_numbers(group, name, path).shape
    return int(shape[0]) if shape else 0


def _rows_read(
    group: Any, path: str | PathLike[str], first: Int64Array, face_first: Int64Array, rank: int
) -> dict[str, Array]:
    """Read and check this rank's rows of every dataset."""
    lo, hi = int(first[rank]), int(first[rank + 1])
    face_lo, face_hi = int(face_first[rank]), int(face_first[rank + 1])
    fields = group.get("cell_fields", {})
    try:
        check_some_cells(int(first[-1]))
        pair, area = (stored_numbers(group, n, path)[face_lo:face_hi] for n in DATASETS[:2])
        center, size = (stored_numbers(group, n, path)[lo:hi] for n in DATASETS[2:])
        rows = {name: stored_numbers(fields, name, path)[lo:hi] for name in fields}
        return {
            "kind": np.full(hi - lo, VERTEX, KIND),
            "face_cell": check_face_cells(pair, int(first[-1]), first=face_lo),
            "face_measure": check_sizes(area, len(pair), "face", first=face_lo),
            "given_center": check_positions(center, "cell centre", first=lo),
            "given_measure": check_sizes(size, len(center), "cell", first=lo),
            **{f"cell:{n}": v for n, v in check_fields(rows, len(center), "cell").items()},
        }
    except MeshError as error:
        raise MeshError(f"{path}: {error}") from error
