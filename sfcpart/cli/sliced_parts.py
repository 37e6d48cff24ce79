"""The parts of a slice's cells, from a field, a file or a folder, as `assess` is given them."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from sfcpart.errors import InputError, PartitionError
from sfcpart.partition import Partition
from sfcpart.slices.gate import agreed
from sfcpart.slices.routing import block_bounds, dealing, owner_of

if TYPE_CHECKING:
    from sfcpart.dtypes import Array, Int64Array
    from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["partition_of_slice"]


def partition_of_slice(held: MeshSlice, parts: str | None, field: str | None) -> Partition:
    """Return the parts of the cells of this rank (collective)."""
    comm = held.comm
    if field is not None:
        values = agreed(comm, lambda: _field(held, field))
    elif parts is not None and (Path(parts) / "parts.vtkhdf").exists():
        values = _owners(held, parts)
    else:
        from sfcpart.files.meshes.cell_values import read_cell_slice

        place = Path(parts or "")
        inside = place / "cell_part.npy"
        values = read_cell_slice(inside if inside.exists() else place, held.rank_first, comm=comm)
    found = agreed(comm, lambda: _checked(values))
    most = np.array([found.n_parts], np.int64)
    return Partition(found.cell_part, int(comm.allreduce(most, "max")[0]))


def _field(held: MeshSlice, name: str) -> Array:
    """Return a cell field."""
    fields = held.mesh.cell_fields
    if name not in fields:
        raise InputError(f"the mesh has no cell field {name!r}; it has: {', '.join(fields)}")
    return fields[name]


def _checked(values: Array) -> Partition:
    """Check the parts of the cells here; there may be none."""
    return Partition.from_array(values, None if len(values) else 1)


def _owners(held: MeshSlice, folder: str) -> Int64Array:
    """Collect the owned cells of all parts of a folder: each rank reads its share of the parts."""
    from sfcpart.files.parts.part import read_part

    comm, n_cells = held.comm, held.n_cells
    n_parts = agreed(comm, lambda: read_part(folder, 0).n_parts)
    bounds = block_bounds(n_parts, comm.size)

    def read() -> tuple[Array, Array]:
        gids, numbers = [np.zeros(0, np.int64)], [np.zeros(0, np.int64)]
        for part in range(bounds[comm.rank], bounds[comm.rank + 1]):
            piece = read_part(folder, part)
            owned = piece.cell_gid[: piece.n_owned]
            if len(owned) and owned.max() >= n_cells:
                raise PartitionError(
                    f"{folder}: part {part} holds cell {owned.max()}; the mesh has {n_cells} cells"
                )
            gids.append(owned)
            numbers.append(np.full(len(owned), part))
        return np.concatenate(gids), np.concatenate(numbers)

    gid, number = agreed(comm, read)
    way = dealing(comm, owner_of(gid, held.rank_first))
    cell_part = np.full(held.n_local, -1, np.int64)
    cell_part[way.forward(gid) - held.first_gid] = way.forward(number)
    missing = np.flatnonzero(cell_part < 0)
    error = None
    if len(missing):
        cell = held.first_gid + int(missing[0])
        error = PartitionError(f"{folder}: no part holds cell {cell} of this mesh")
    comm.check(error)
    return cell_part
