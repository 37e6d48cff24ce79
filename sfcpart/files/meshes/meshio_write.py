"""Add integer fields of the cells to a mesh file through meshio, with everything else kept."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import FileError, InputError
from sfcpart.files.meshes.meshio_files import load_with_meshio, meshio_of_raw, save_with_meshio
from sfcpart.mesh.kinds import kind_of

__all__ = ["MESHIO_CARRIERS", "add_fields_with_meshio"]

MESHIO_CARRIERS = ("vtu", "vtk", "gmsh", "xdmf", "tecplot")
"""Formats that can carry a field of the cells through meshio."""

# meshio's writer of Gmsh 4.1 wants physical groups on every element; 2.2 does without.
_WRITERS = {"gmsh": "gmsh22"}


def add_fields_with_meshio(
    path: Path, source: Path, name: str, fields: Mapping[str, Array]
) -> None:
    """Write a copy of a mesh file in format `name` with fields added; see `own_format`.

    Gmsh files are written in version 2.2 and store fields as reals; the numbers are the same.
    """
    mesh = _load(source, name)
    for field_name, values in fields.items():
        mesh.cell_data[field_name] = _per_block(mesh, np.asarray(values), field_name)
    save_with_meshio(path, mesh, _WRITERS.get(name, name))


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
