"""A series in one HDF5 file: the group `/series`, a group for each frame, in order of name.

============================ ============================ =====================================
in `/series/<frame>`         shape and type               content
============================ ============================ =====================================
`faces_mesh/`                `sfcpart.files.meshes`       the mesh; absent: that of the frame
                             `.faces_file`                before (frame 0 must have one, unless
                                                          a mesh is given beside the file)
`parent`                     (n_cells,) integers          cell of the frame before that each cell
                                                          lies in; only with a mesh of its own
`weight`                     (n_cells,) numbers, optional work of each cell
`speed`                      (n_parts,) reals, optional   relative speed of each rank
attribute `steps`            whole number, optional       steps the frame lasts (1)
============================ ============================ =====================================

The attribute `layout` of `/series` is 1. Frames are written and read one by one.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from os import PathLike
from typing import Any

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import FileError, InputError
from sfcpart.files.hdf5 import check_stored, create_hdf5, read_hdf5
from sfcpart.files.meshes.faces_file import faces_of, put_faces
from sfcpart.files.series.frame import Frame
from sfcpart.mesh.mesh import Mesh

__all__ = ["frame_names", "read_frames", "write_series"]

_LAYOUT = 1
_GROUP = "series"


def frame_names(path: str | PathLike[str]) -> list[str]:
    """Return the names of the frames.

    Raises
    ------
    FileError
        If the file holds no series.
    """
    with read_hdf5(path) as file:
        return sorted(_series_of(file, path))


def read_frames(path: str | PathLike[str], *, mesh: Mesh | None = None) -> Iterator[Frame]:
    """Yield the frames one by one.

    Parameters
    ----------
    path : path
    mesh : Mesh, optional
        Of frames before the first that has one of its own.

    Raises
    ------
    FileError
        If the file cannot be read or something is missing.
    """
    with read_hdf5(path) as file:
        group = _series_of(file, path)
        for name in sorted(group):
            place = group[name]
            own = "faces_mesh" in place
            mesh = faces_of(place, path) if own else mesh
            if mesh is None:
                raise FileError(f"{path}: {name} has no faces_mesh; give the mesh beside the file")
            values = {key: _values(place, key, path) for key in ("weight", "parent", "speed")}
            steps = place.attrs.get("steps", 1)
            try:
                yield Frame(mesh, steps=int(steps), **values)
            except InputError as error:
                raise type(error)(f"{path}: {name}: {error}") from error


def write_series(path: str | PathLike[str], frames: Iterable[Frame]) -> int:
    """Write frames one by one, as they come; return their number.

    A mesh that is the very object of the frame before is not written again.

    Parameters
    ----------
    path : path
        Replaced if it exists.
    frames : iterable of Frame
        Their meshes are given by faces.

    Raises
    ------
    InputError
        If a mesh is not given by faces, or there is no frame.
    FileError
        If the file cannot be written.
    """
    count, before = 0, None
    with create_hdf5(path) as file:
        group = file.create_group(_GROUP)
        group.attrs["layout"] = _LAYOUT
        for frame in frames:
            place = group.create_group(f"frame_{count:06d}")
            place.attrs["steps"] = int(frame.steps)
            if frame.mesh is not before:
                put_faces(place, frame.mesh)
            for key in ("weight", "parent", "speed"):
                if getattr(frame, key) is not None:
                    place.create_dataset(key, data=np.asarray(getattr(frame, key)))
            before, count = frame.mesh, count + 1
    if not count:
        raise InputError("the series is empty; wanted at least one frame")
    return count


def _series_of(file: Any, path: str | PathLike[str]) -> Any:
    """Return the group of the series, which must have frames."""
    if _GROUP not in file:
        raise FileError(f"{path}: has no group {_GROUP}; wanted a series of frames")
    group = file[_GROUP]
    if group.attrs.get("layout") != _LAYOUT:
        raise FileError(f"{path}: {_GROUP} has layout {group.attrs.get('layout')}; wanted 1")
    if not len(group):
        raise FileError(f"{path}: the series is empty; wanted at least one frame")
    return group


def _values(place: Any, key: str, path: str | PathLike[str]) -> Array | None:
    """Read one optional dataset of numbers."""
    if key not in place:
        return None
    dtype = getattr(place[key], "dtype", None)
    if dtype is None or dtype.kind not in "biuf":
        raise FileError(f"{path}: {place.name}/{key} is {dtype or 'a group'}; wanted numbers")
    check_stored(place[key], path)
    return np.asarray(place[key][()])
