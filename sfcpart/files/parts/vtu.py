"""Write the parts as VTU pieces, one file each, with a PVTU that joins them.

What: `parts.pvtu`, `pieces/part_0000.vtu`, ... and the exchange lists in `lists.h5`; cells, ghost
marks, global ids and fields as in the VTKHDF file.
How: a short header in XML, then the arrays as they are (raw appended data, UInt64 headers).
Cost: O(entries) time; memory for one block of parts.
Source: VTK file formats (XML), unstructured grid and parallel unstructured grid.
"""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING
from xml.sax.saxutils import quoteattr

import numpy as np

from sfcpart.dtypes import GID, OFFSET, Array, Int64Array, IntArray
from sfcpart.errors import FileError
from sfcpart.files.parts.boundary import groups_by_part
from sfcpart.files.parts.fields import gathered, writable_fields
from sfcpart.files.parts.lists import write_list_file
from sfcpart.files.parts.pieces import (
    POLYHEDRON,
    Block,
    Drawing,
    Renumbered,
    blocks,
    check_same_cells,
    drawing_of,
)
from sfcpart.files.parts.vtkhdf_write import CELL_NAMES, POINT_NAMES

if TYPE_CHECKING:
    from collections.abc import Mapping
    from os import PathLike

    from sfcpart.halo import Halo
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition

__all__ = ["write_vtu_pieces"]

_OPENING = (
    '<?xml version="1.0"?>\n<VTKFile type="{kind}" version="1.0" '
    'byte_order="LittleEndian" header_type="UInt64">\n'
)
_ACTIVE = {"CellData": "GlobalCellIds", "PointData": "GlobalPointIds"}


@dataclass(frozen=True, eq=False)
class _Piece:
    """The arrays of one part, by section of the file."""

    sections: Mapping[str, Mapping[str, Array]]
    n_points: int
    n_cells: int


def write_vtu_pieces(
    folder: str | PathLike[str],
    mesh: Mesh,
    *,
    partition: Partition,
    halo: Halo,
    input_digest: str = "",
) -> None:
    """Write one VTU file a part, a PVTU that names them, and the exchange lists.

    Parameters
    ----------
    folder : path
        An existing folder (see `sfcpart.files.parts.folder`).
    mesh : Mesh
        Cell and point fields go along; without points, cells become vertices at their centres.
    partition : Partition
    halo : Halo
    input_digest : str, optional
        Text kept with the lists to tell which mesh was split.

    Raises
    ------
    FileError
        If a file cannot be written.
    PartitionError
        If the lists belong to another mesh.
    """
    place = Path(folder)
    drawing = drawing_of(mesh)
    check_same_cells(drawing, partition, halo)
    cell_fields = writable_fields(mesh.cell_fields, CELL_NAMES)
    given = mesh.point_fields if drawing.points is mesh.points else {}
    point_fields = writable_fields(given, POINT_NAMES)
    names = [f"pieces/part_{part:04d}.vtu" for part in range(halo.n_parts)]
    points_of_parts: list[IntArray] = []
    try:
        (place / "pieces").mkdir(exist_ok=True)
        for block in blocks(drawing, halo):
            for k in range(block.n_parts):
                piece = _piece(block, k, drawing, partition, cell_fields, point_fields)
                _write_piece(place / names[block.first + k], piece)
            points_of_parts.extend(np.split(block.points.used, block.points.used_indptr[1:-1]))
        _write_joint(place / "parts.pvtu", piece, names)
    except OSError as error:
        if isinstance(error, FileError):
            raise
        raise FileError(f"{place}: cannot be written: {error.strerror or error}") from error
    groups = groups_by_part(mesh, halo, points_of_parts)
    write_list_file(place / "lists.h5", halo, groups=groups, input_digest=input_digest)


def _piece(
    block: Block,
    k: int,
    drawing: Drawing,
    partition: Partition,
    cell_fields: Mapping[str, Array],
    point_fields: Mapping[str, Array],
) -> _Piece:
    """Take the k-th part of a block and add its fields."""
    rows = slice(block.cell_indptr[k], block.cell_indptr[k + 1])
    cells, points = block.cells[rows], _part_of(block.points, k, rows)
    cell_data: dict[str, Array] = {
        "vtkGhostType": block.ghost[rows],
        "GlobalCellIds": cells.astype(GID),
        "part": partition.cell_part[cells],
        **{name: gathered(field, cells) for name, field in cell_fields.items()},
    }
    point_data: dict[str, Array] = {
        "GlobalPointIds": points.used.astype(GID),
        **{name: gathered(field, points.used) for name, field in point_fields.items()},
    }
    shape: dict[str, Array] = {
        "connectivity": points.entries,
        "offsets": points.offsets[1:].astype(OFFSET),
        "types": drawing.kind[cells],
    }
    if block.faces is not None and block.face_points is not None:
        faces = _part_of(block.faces, k, rows)
        face_rows = slice(block.faces.used_indptr[k], block.faces.used_indptr[k + 1])
        stream, end = _face_stream(faces, _part_of(block.face_points, k, face_rows))
        shape["faces"] = stream
        shape["faceoffsets"] = np.where(drawing.kind[cells] == POLYHEDRON, end, -1)
    sections: dict[str, Mapping[str, Array]] = {
        "Points": {"Points": drawing.coordinates(points.used)},
        "Cells": shape,
        "PointData": point_data,
        "CellData": cell_data,
    }
    return _Piece(sections, n_points=len(points.used), n_cells=len(cells))


def _part_of(several: Renumbered, k: int, rows: slice) -> Renumbered:
    """Return the k-th part alone, given its rows."""
    entries = slice(several.entry_indptr[k], several.entry_indptr[k + 1])
    used = slice(several.used_indptr[k], several.used_indptr[k + 1])
    return Renumbered(
        several.entry_indptr[k : k + 2] - several.entry_indptr[k],
        several.entries[entries],
        several.offsets[rows.start + k : rows.stop + k + 1],
        several.used_indptr[k : k + 2] - several.used_indptr[k],
        several.used[used],
    )


def _face_stream(faces: Renumbered, face_points: Renumbered) -> tuple[Int64Array, Int64Array]:
    """Return the faces of all polyhedra in VTU's form, and where each cell's ends.

    For each cell: the number of its faces, and for each face the number of its points and
    these points. Cells without faces take no room.
    """
    n_faces = np.diff(faces.offsets).astype(OFFSET)
    size = np.diff(face_points.offsets).astype(OFFSET)[faces.entries]
    row_end = np.concatenate([[0], np.cumsum(size + 1)])
    length = row_end[faces.offsets[1:]] - row_end[faces.offsets[:-1]] + (n_faces > 0)
    end = np.cumsum(length)
    stream = np.empty(int(end[-1]) if len(end) else 0, OFFSET)
    stream[(end - length)[n_faces > 0]] = n_faces[n_faces > 0]
    heads_before = np.repeat(np.cumsum(n_faces > 0), n_faces)
    at = row_end[:-1] + heads_before
    stream[at] = size
    within = np.arange(int(size.sum())) - np.repeat(np.cumsum(size) - size, size)
    source = np.repeat(face_points.offsets[faces.entries].astype(OFFSET), size) + within
    stream[np.repeat(at + 1, size) + within] = face_points.entries[source]
    return stream, end


def _write_piece(path: Path, piece: _Piece) -> None:
    """Write one VTU file."""
    lines = [_OPENING.format(kind="UnstructuredGrid"), "<UnstructuredGrid>\n"]
    lines.append(f'<Piece NumberOfPoints="{piece.n_points}" NumberOfCells="{piece.n_cells}">\n')
    at, arrays = 0, []
    for section, members in piece.sections.items():
        lines.append(f"<{section}{_active(section)}>\n")
        for name, array in members.items():
            about = _array_tag("DataArray", name, array)
            lines.append(f'{about} format="appended" offset="{at}"/>\n')
            arrays.append(array)
            at += 8 + array.nbytes
        lines.append(f"</{section}>\n")
    lines.append('</Piece>\n</UnstructuredGrid>\n<AppendedData encoding="raw">\n_')
    with path.open("wb") as file:
        file.write("".join(lines).encode())
        for array in arrays:
            file.write(np.uint64(array.nbytes).astype("<u8").tobytes())
            file.write(np.ascontiguousarray(array, array.dtype.newbyteorder("<")).data)
        file.write(b"\n</AppendedData>\n</VTKFile>\n")


def _write_joint(path: Path, example: _Piece, names: list[str]) -> None:
    """Write the PVTU file; all pieces have the arrays of the example."""
    lines = [_OPENING.format(kind="PUnstructuredGrid"), '<PUnstructuredGrid GhostLevel="1">\n']
    for section in ("PointData", "CellData", "Points"):
        lines.append(f"<P{section}{_active(section)}>\n")
        for name, array in example.sections[section].items():
            lines.append(_array_tag("PDataArray", name, array) + "/>\n")
        lines.append(f"</P{section}>\n")
    lines.extend(f"<Piece Source={quoteattr(name)}/>\n" for name in names)
    lines.append("</PUnstructuredGrid>\n</VTKFile>\n")
    path.write_text("".join(lines), encoding="utf-8")


def _active(section: str) -> str:
    """Return the attribute that marks the global ids of a section."""
    return f' GlobalIds="{_ACTIVE[section]}"' if section in _ACTIVE else ""


def _array_tag(tag: str, name: str, array: Array) -> str:
    """Return the beginning of the element that describes an array."""
    kind = {"i": "Int", "u": "UInt", "f": "Float"}[array.dtype.kind]
    width = "" if array.ndim == 1 else f' NumberOfComponents="{array.shape[1]}"'
    return f'<{tag} type="{kind}{8 * array.dtype.itemsize}" Name={quoteattr(name)}{width}'
