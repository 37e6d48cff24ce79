"""Add integer fields of the cells to a file in its own format, with everything else kept.

The file is read again through meshio, gets the fields, is written beside, read back and
compared, forced to disk and renamed: the target is complete or as it was before.
"""

from __future__ import annotations

import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import FileError, InputError, SfcpartError
from sfcpart.files.meshes.meshio_files import load_with_meshio, meshio_of_raw, save_with_meshio
from sfcpart.files.meshes.read import file_format, read_mesh
from sfcpart.mesh.kinds import kind_of

__all__ = ["CARRIERS", "write_with_meshio"]

CARRIERS = ("vtu", "vtk", "gmsh", "xdmf", "tecplot")
"""Formats that can carry a field of the cells through meshio."""

# meshio's writer of Gmsh 4.1 wants physical groups on every element; 2.2 does without.
_WRITERS = {"gmsh": "gmsh22"}


def write_with_meshio(
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
        In the order of `read_mesh(mesh_path)`. Elements of lower dimension get -1.

    Raises
    ------
    FileError
        If the format cannot carry fields of cells (which can: `CARRIERS`), or reading or
        writing fails; `path` is then as it was.
    InputError
        If a field has another number of rows than the mesh has cells.

    Notes
    -----
    Gmsh files are written in version 2.2 and store fields as reals; the numbers are the same.
    Cost: reading twice, writing once.
    """
    source, target = Path(mesh_path), Path(path)
    name = next((name for name in file_format(source) if name in CARRIERS), "")
    if not name:
        raise FileError(
            f"{source}: its format ({file_format(source)[0]}) cannot carry fields of cells; "
            f"choose one that can: {', '.join(CARRIERS)} or vtkhdf"
        )
    mesh = _load(source, name)
    for field_name, values in fields.items():
        mesh.cell_data[field_name] = _per_block(mesh, np.asarray(values), field_name)
    beside = target.with_name(f".{target.stem}.{os.getpid()}{target.suffix}")
    try:
        save_with_meshio(beside, mesh, _WRITERS.get(name, name))
        _check_same(beside, fields, source)
        _force_to_disk(beside)
        beside.replace(target)
    except OSError as error:
        raise _named(error, target) from error
    finally:
        beside.unlink(missing_ok=True)


def _load(source: Path, name: str) -> Any:
    """Read a file as a meshio mesh; VTK files by our readers, which lose nothing."""
    if name in ("vtk", "vtu"):
        from sfcpart.files.meshes.vtk_read import read_vtk
        from sfcpart.files.meshes.vtu_read import read_vtu

        return meshio_of_raw(read_vtk(source) if name == "vtk" else read_vtu(source))
    try:
        return load_with_meshio(source, name)
    except FileError as error:
        raise FileError(f"{source}: {error}") from error


def _per_block(mesh: Any, values: Array, field_name: str) -> list[Array]:
    """Cut a field into meshio's blocks; elements of lower dimension get -1."""
    dims = [kind_of(block.type).dim for block in mesh.cells]
    sizes = [
        len(block.data) if dim == max(dims) else 0
        for block, dim in zip(mesh.cells, dims, strict=True)
    ]
    if values.shape != (sum(sizes),) or values.dtype.kind not in "iu":
        raise InputError(
            f"field {field_name!r} has shape {values.shape} and dtype {values.dtype}; "
            f"wanted {sum(sizes)} integers, one a cell"
        )
    pieces, at = [], 0
    for block, size in zip(mesh.cells, sizes, strict=True):
        own = values[at : at + size] if size else np.full(len(block.data), -1)
        pieces.append(own.astype(np.int32))
        at += size
    return pieces


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
