"""Meshes given by faces, in a small HDF5 layout of our own (extension `.h5`).

For meshes as finite-volume codes hold them, hanging nodes and any polyhedra included: no
points, only which cells meet at each face. Everything is in the group `/faces_mesh`:

===================== =================================== ==========================
dataset               shape and type                      content
===================== =================================== ==========================
`face_cell`           (n_faces, 2) integers               the two cells; -1 second on the boundary
`face_measure`        (n_faces,) reals                    area (3-D) or length (2-D)
`cell_center`         (n_cells, 2 or 3) reals             centre of each cell
`cell_measure`        (n_cells,) reals                    volume or area
`cell_fields/<name>`  (n_cells, ...) numbers, optional    fields
===================== =================================== ==========================

and the attribute `layout` is 1. Cost: linear; written arrays are not packed.
"""

from __future__ import annotations

from os import PathLike
from typing import Any

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import FileError, InputError, MeshError
from sfcpart.files.hdf5 import check_stored, create_hdf5, read_hdf5
from sfcpart.mesh.mesh import Mesh

__all__ = [
    "DATASETS",
    "checked_group",
    "faces_of",
    "put_faces",
    "read_faces",
    "stored_numbers",
    "write_faces",
]

_LAYOUT = 1
_GROUP = "faces_mesh"


def read_faces(path: str | PathLike[str]) -> Mesh:
    """Read a mesh given by faces.

    Parameters
    ----------
    path : path

    Returns
    -------
    Mesh
        Without points.

    Raises
    ------
    FileError
        If the file cannot be read or a dataset is missing.
    MeshError
        If cells, measures or centres are wrong; the message starts with the path.
    """
    with read_hdf5(path) as file:
        return faces_of(file, path)


def faces_of(place: Any, path: str | PathLike[str]) -> Mesh:
    """Read the mesh in the group `faces_mesh` of an open HDF5 file or of a group in it."""
    group = checked_group(place, path)
    fields = group.get("cell_fields", {})
    arrays = [_array(group, name, path) for name in DATASETS]
    cell_fields = {name: _array(fields, name, path) for name in fields}
    try:
        return Mesh.from_faces(*arrays, cell_fields=cell_fields)
    except MeshError as error:
        raise MeshError(f"{path}: {error}") from error


def checked_group(place: Any, path: str | PathLike[str]) -> Any:
    """Return the group of the mesh, which must have the layout that is known."""
    if _GROUP not in place:
        raise FileError(f"{path}: has no group {_GROUP}")
    group = place[_GROUP]
    if group.attrs.get("layout") != _LAYOUT:
        raise FileError(
            f"{path}: {_GROUP} has layout {group.attrs.get('layout')}; wanted {_LAYOUT}"
        )
    return group


DATASETS = ("face_cell", "face_measure", "cell_center", "cell_measure")


def _array(group: Any, name: str, path: str | PathLike[str]) -> Array:
    """Read one dataset of numbers."""
    return np.asarray(stored_numbers(group, name, path)[()])


def stored_numbers(group: Any, name: str, path: str | PathLike[str]) -> Any:
    """Return a dataset, which must hold numbers."""
    dtype = getattr(group.get(name), "dtype", None)
    if dtype is None or dtype.kind not in "biuf":
        raise FileError(f"{path}: {_GROUP}/{name} is {dtype or 'missing'}; wanted numbers")
    check_stored(group[name], path)
    return group[name]


def write_faces(path: str | PathLike[str], mesh: Mesh) -> None:
    """Write a mesh that is given by faces.

    Parameters
    ----------
    path : path
        Replaced if it exists.
    mesh : Mesh
        Made by `Mesh.from_faces`.

    Raises
    ------
    InputError
        If the mesh is not given by faces.
    FileError
        If the file cannot be written.
    """
    _given_by_faces(mesh)
    with create_hdf5(path) as file:
        put_faces(file, mesh)


def put_faces(place: Any, mesh: Mesh) -> None:
    """Write the group `faces_mesh` into an open HDF5 file or a group in it."""
    arrays = _given_by_faces(mesh)
    group = place.create_group(_GROUP)
    group.attrs["layout"] = _LAYOUT
    for name, array in zip(DATASETS, arrays, strict=True):
        group.create_dataset(name, data=array)
    for name, values in mesh.cell_fields.items():
        group.create_dataset(f"cell_fields/{name}", data=values)


def _given_by_faces(mesh: Mesh) -> tuple[Array, Array, Array, Array]:
    """Return the arrays of a mesh given by faces, or refuse another."""
    if mesh.faces is None or mesh.given_center is None or mesh.given_measure is None:
        raise InputError("the mesh is not given by faces; write_faces wants Mesh.from_faces")
    return mesh.faces.cell, mesh.faces.measure, mesh.given_center, mesh.given_measure
