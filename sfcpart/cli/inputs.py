"""Read what the command line names: the mesh, parts, speeds, pairs of cells."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.errors import FileError, InputError, PartitionError

if TYPE_CHECKING:
    from collections.abc import Mapping

    from sfcpart.dtypes import Array, IntArray
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = [
    "partition_from_field",
    "partition_from_path",
    "partition_from_place",
    "read_mesh",
    "read_numbers",
    "read_pairs",
    "read_speeds",
]


def read_mesh(path: str, *, merge_points: float | None = None) -> Mesh:
    """Read a mesh that there is memory to split, with near points merged if asked.

    Where the file tells its size, that is settled before it is read.
    """
    from sfcpart.files.meshes import read  # not the api, which loads kernels
    from sfcpart.memory import check_memory, memory_for_file, memory_for_mesh

    check_memory(memory_for_file(path), path)
    mesh = read.read_mesh(path)
    check_memory(memory_for_mesh(mesh), path)
    return mesh if merge_points is None else mesh.with_points_merged(merge_points)


def partition_from_field(mesh: Mesh, name: str) -> Partition:
    """Return the partition that a cell field holds."""
    from sfcpart.partition import Partition

    if name not in mesh.cell_fields:
        there = ", ".join(mesh.cell_fields) or "none"
        raise InputError(f"the mesh has no cell field {name!r}; it has: {there}")
    return Partition.from_array(mesh.cell_fields[name])


def partition_from_path(path: str, n_cells: int) -> Partition:
    """Return the partition in a file of integers, or in a folder that split wrote."""
    from sfcpart.partition import Partition

    place = Path(path)
    if not place.is_dir():
        from sfcpart.files.meshes.cell_values import read_cell_values

        return Partition.from_array(read_cell_values(place, n_cells))
    if not (place / "parts.vtkhdf").exists() and (place / "cell_part.npy").exists():
        return partition_from_path(str(place / "cell_part.npy"), n_cells)
    cell_part, n_parts = _owners(place, n_cells)
    return Partition.from_array(cell_part, n_parts)


def partition_from_place(fields: Mapping[str, Array], place: str, n_cells: int | None) -> Partition:
    """Return the partition that a cell field of this name holds, or else a path.

    Parameters
    ----------
    fields : mapping of str to array
    place : str
    n_cells : int or None
        None: of a mesh that is not at hand, however many cells it has.
    """
    from sfcpart.partition import Partition

    if place in fields:
        return Partition.from_array(fields[place])
    if n_cells is not None:
        return partition_from_path(place, n_cells)
    path = Path(place)
    return Partition.from_array(
        read_numbers(str(path / "cell_part.npy" if path.is_dir() else path))
    )


def read_numbers(path: str, count: int | None = None) -> Array:
    """Return the numbers in a text or .npy file, however many if no count is given."""
    from sfcpart.files.meshes.cell_values import read_cell_values

    return read_cell_values(path, count)


def _owners(folder: Path, n_cells: int) -> tuple[Array, int]:
    """Collect the owned cells of all parts of a folder."""
    from sfcpart.files.parts.part import read_part

    first = read_part(folder, 0)
    cell_part = np.full(n_cells, -1, np.int64)
    for part in range(first.n_parts):
        piece = first if part == 0 else read_part(folder, part)
        owned = piece.cell_gid[: piece.n_owned]
        if len(owned) and owned.max() >= n_cells:
            raise PartitionError(
                f"{folder}: part {part} holds cell {owned.max()}; the mesh has {n_cells} cells"
            )
        cell_part[owned] = part
    if n_cells and cell_part.min() < 0:
        missing = int(np.argmin(cell_part))
        raise PartitionError(f"{folder}: no part holds cell {missing} of this mesh")
    return cell_part, first.n_parts


def read_speeds(speeds: Any, n_parts: int) -> Array | None:
    """Return the speed of each part, from a list, a file of numbers or a file of costs."""
    if speeds is None:
        return None
    if isinstance(speeds, list):
        return np.array(speeds)
    if speeds.lower().endswith(".json"):
        from sfcpart.files.weights_file import read_costs

        fitted = read_costs(speeds).speed
        if fitted is None:
            raise FileError(f"{speeds}: holds no speeds of ranks; fit them from two partitions")
        return np.array(fitted)
    from sfcpart.files.meshes.cell_values import read_cell_values

    return read_cell_values(speeds, n_parts).astype(float)


def read_pairs(path: str | None) -> IntArray | None:
    """Return the pairs of cells in a text or .npy file, (n, 2)."""
    if path is None:
        return None
    try:
        if path.endswith(".npy"):
            pairs: Array = np.load(path, allow_pickle=False)
        else:
            pairs = np.loadtxt(path, dtype=np.int64, ndmin=2, delimiter=_delimiter(path))
    except OSError as error:
        raise FileError(f"{path}: cannot be read: {error.strerror or error}") from error
    except ValueError as error:
        raise FileError(f"{path}: wanted two cell numbers a line: {error}") from error
    if pairs.ndim != 2 or pairs.shape[1] != 2 or pairs.dtype.kind not in "iu":
        raise FileError(
            f"{path}: holds {pairs.dtype} of shape {pairs.shape}; wanted pairs of cells"
        )
    return pairs


def _delimiter(path: str) -> str | None:
    """Return the comma if the first line has one, else blanks."""
    with Path(path).open(encoding="utf-8", errors="replace") as file:
        return "," if "," in file.readline() else None
