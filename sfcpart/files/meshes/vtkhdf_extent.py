"""Which rows of a VTKHDF file's datasets are to be read: those of all parts of the last time step.

Source: VTK file formats, "VTKHDF" (https://docs.vtk.org), versions 1.0 to 2.6.
"""

from __future__ import annotations

from dataclasses import dataclass
from os import PathLike
from typing import Any

import numpy as np

from sfcpart.dtypes import Int64Array
from sfcpart.errors import FileError
from sfcpart.files.hdf5 import check_stored

__all__ = ["Extent", "at_step", "dataset_of", "extent_of", "grid_of", "numbers_of"]


@dataclass(frozen=True)
class Extent:
    """Which rows of the datasets belong to the step that is read."""

    step: int  # -1 without time steps
    first_part: int
    n_points: list[int]
    n_cells: list[int]
    n_ids: list[int]
    point: int
    cell: int
    id: int


def grid_of(file: Any, path: str | PathLike[str]) -> Any:
    """Return the group of the grid; say what else the file is if it is no unstructured grid."""
    if "VTKHDF" not in file:
        inside = ", ".join(list(file)[:8]) or "nothing"
        raise FileError(f"{path}: is HDF5, but has no group VTKHDF (it has {inside})")
    group = file["VTKHDF"]
    found = group.attrs.get("Type", b"")
    kind = found.decode("ascii", "replace") if isinstance(found, bytes) else str(found)
    if kind != "UnstructuredGrid":
        raise FileError(
            f"{path}: is VTKHDF of type {kind or 'unknown'}; wanted UnstructuredGrid "
            f"(save the mesh as one unstructured grid)"
        )
    version = np.asarray(group.attrs.get("Version", [0, 0])).reshape(-1)
    if len(version) < 1 or version[0] not in (1, 2):
        raise FileError(f"{path}: is VTKHDF version {version.tolist()}; wanted version 1 or 2")
    return group


def extent_of(group: Any, path: str) -> Extent:
    """Find the parts and first rows of the last time step, or of the whole file."""
    counts = [
        numbers_of(group, name, path)
        for name in ("NumberOfPoints", "NumberOfCells", "NumberOfConnectivityIds")
    ]
    if len({len(count) for count in counts}) != 1:
        raise FileError(f"{path}: the counts of points, cells and ids differ in number of parts")
    if "Steps" not in group:
        whole = [count.tolist() for count in counts]
        return Extent(-1, 0, whole[0], whole[1], whole[2], 0, 0, 0)
    steps = group["Steps"]
    step = int(steps.attrs["NSteps"]) - 1
    if step < 0:
        raise FileError(f"{path}: holds no time steps")
    at = {name: at_step(steps, name, step, path) for name in _STEP_STARTS}
    first = at["PartOffsets"]
    n_parts = len(counts[0]) - first
    if "NumberOfParts" in steps:
        n_parts = at_step(steps, "NumberOfParts", step, path)
    if first < 0 or n_parts < 0 or first + n_parts > len(counts[0]):
        raise FileError(f"{path}: the last time step has parts {first} to {first + n_parts - 1}")
    own = [count[first : first + n_parts].tolist() for count in counts]
    starts = (at["PointOffsets"], at["CellOffsets"], at["ConnectivityIdOffsets"])
    return Extent(step, first, own[0], own[1], own[2], *starts)


_STEP_STARTS = ("PartOffsets", "PointOffsets", "CellOffsets", "ConnectivityIdOffsets")


def at_step(steps: Any, name: str, step: int, path: str) -> int:
    """Return the entry of one time step of a dataset of `Steps`."""
    values = np.asarray(steps[name][()]).reshape(-1)
    if step >= len(values) or values[step] < 0:
        raise FileError(f"{path}: Steps/{name} has no entry for time step {step}")
    return int(values[step])


def numbers_of(group: Any, name: str, path: str) -> Int64Array:
    """Read a small dataset of counts."""
    counts = np.asarray(dataset_of(group, name, "iu", path)[()]).reshape(-1)
    if np.any(counts < 0):
        raise FileError(f"{path}: {name} holds {counts.min()}; counts cannot be negative")
    return counts.astype(np.int64)


def dataset_of(group: Any, name: str, dtype_kinds: str, path: str) -> Any:
    """Return a dataset that must be there and hold numbers of some sort."""
    if name not in group or not hasattr(group[name], "dtype"):
        raise FileError(f"{path}: VTKHDF/{name} is missing; the file is no complete mesh")
    dataset = group[name]
    if dataset.dtype.kind not in dtype_kinds:
        raise FileError(f"{path}: VTKHDF/{name} holds {dataset.dtype}; wanted numbers")
    check_stored(dataset, path)
    return dataset
