"""Write a copy of a mesh file, in its own format, with integer fields of the cells added.

How: formats that meshio writes go through it (`sfcpart.files.meshes.meshio_write`); HDF5 files are
copied whole and get one dataset more. The copy is written beside, read back and compared, forced
to disk and renamed: the target is complete or as it was before.
Cost: reading twice, writing once.
"""

from __future__ import annotations

import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from sfcpart.dtypes import PART, Array, Int64Array
from sfcpart.errors import FileError, InputError, SfcpartError
from sfcpart.files.hdf5 import copy_hdf5
from sfcpart.files.meshes.formats import file_format
from sfcpart.files.meshes.meshio_write import MESHIO_CARRIERS, add_fields_with_meshio
from sfcpart.files.meshes.read import read_mesh
from sfcpart.files.meshes.vtkhdf_read import vtkhdf_cell_rows

__all__ = ["CARRIERS", "write_in_own_format"]

CARRIERS = (*MESHIO_CARRIERS, "vtkhdf", "faces")
"""Formats that can carry a field of the cells."""


def write_in_own_format(
    path: str | os.PathLike[str], mesh_path: str | os.PathLike[str], fields: Mapping[str, Array]
) -> None:
    """Write a copy of a mesh file with fields added to its cells.

    Parameters
    ----------
    path : path
        The file to write, in the format of `mesh_path`; replaced if it exists.
    mesh_path : path
        The mesh that was read; it may be `path` itself.
    fields : mapping of str to (n_cells,) integers
        In the order of `read_mesh(mesh_path)`. Elements of lower dimension, ghost cells and
        earlier time steps get -1. A field of the same name is replaced.

    Raises
    ------
    FileError
        If the format cannot carry fields of cells (which can: `CARRIERS`), or reading or
        writing fails; `path` is then as it was.
    InputError
        If a field has another number of rows than the mesh has cells.
    """
    source, target = Path(mesh_path), Path(path)
    name = next((name for name in file_format(source) if name in CARRIERS), "")
    if not name:
        raise FileError(
            f"{source}: its format ({file_format(source)[0]}) cannot carry fields of cells; "
            "write vtkhdf or vtu instead"
        )
    beside = target.with_name(f".{target.stem}.{os.getpid()}{target.suffix}")
    try:
        _write(beside, source, name, fields)
        _check_same(beside, fields, source)
        _force_to_disk(beside)
        beside.replace(target)
    except OSError as error:
        raise _named(error, target) from error
    finally:
        beside.unlink(missing_ok=True)


def _write(path: Path, source: Path, name: str, fields: Mapping[str, Array]) -> None:
    """Write the copy in format `name`."""
    if name == "vtkhdf":
        _copy_vtkhdf(path, source, fields)
    elif name == "faces":
        _copy_faces(path, source, fields)
    else:
        add_fields_with_meshio(path, source, name, fields)


def _copy_vtkhdf(path: Path, source: Path, fields: Mapping[str, Array]) -> None:
    """Copy a VTKHDF file and add datasets to its `CellData`."""
    n_rows, cell_row = vtkhdf_cell_rows(source)
    with copy_hdf5(path, source) as file:
        root = file["VTKHDF"]
        steps = root.get("Steps")
        for name, values in fields.items():
            column = np.full(n_rows, -1, PART)
            column[cell_row] = _checked(values, cell_row, name)
            _put(root, f"CellData/{name}", column)
            if steps is not None:
                _put(steps, f"CellDataOffsets/{name}", steps["CellOffsets"][()])


def _copy_faces(path: Path, source: Path, fields: Mapping[str, Array]) -> None:
    """Copy a file of faces and add to its fields."""
    with copy_hdf5(path, source) as file:
        root = file["faces_mesh"]
        for name, values in fields.items():
            rows = np.arange(len(root["cell_measure"]))
            _put(root, f"cell_fields/{name}", _checked(values, rows, name).astype(PART))


def _checked(values: Array, cell_row: Int64Array, name: str) -> Array:
    """Return integers, one a cell."""
    values = np.asarray(values)
    if values.shape != cell_row.shape or values.dtype.kind not in "iu":
        raise InputError(
            f"field {name!r} has shape {values.shape} and dtype {values.dtype}; "
            f"wanted {len(cell_row)} integers, one a cell"
        )
    return values


def _put(group: Any, name: str, values: Array) -> None:
    """Write a dataset in place of one of the same name."""
    if name in group:
        del group[name]
    group.create_dataset(name, data=values)


def _check_same(beside: Path, fields: Mapping[str, Array], source: Path) -> None:
    """Read back what was written; a format that dropped a field is refused."""
    try:
        written = read_mesh(beside).cell_fields
    except SfcpartError as error:
        raise FileError(
            f"{source}: its format cannot hold this mesh with fields: {error}"
        ) from error
    for name, values in fields.items():
        if name not in written or not np.array_equal(written[name], values):
            raise FileError(f"{source}: its format does not keep the field {name!r}; use vtu")


def _force_to_disk(path: Path) -> None:
    """Wait until a file is on the disk."""
    with path.open("rb") as file:
        os.fsync(file.fileno())


def _named(error: OSError, target: Path) -> FileError:
    """Pass our own errors, and give others the name of the file."""
    if isinstance(error, FileError):
        return error
    return FileError(f"{target}: cannot be written: {error.strerror or error}")
