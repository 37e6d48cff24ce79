"""Write the parts as VTU pieces, one file each, with a PVTU that joins them.

What: `parts.pvtu`, `pieces/part_0000.vtu`, ... and the exchange lists in `lists.h5`; cells, ghost
marks, global ids and fields as in the VTKHDF file.
How: a short header in XML, then the arrays as they are (raw appended data, UInt64 headers).
Cost: O(entries) time; memory for one block of parts.
Source: VTK file formats (XML), unstructured grid and parallel unstructured grid.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING
from xml.sax.saxutils import quoteattr

import numpy as np

from sfcpart.dtypes import GID, OFFSET, Array, Int64Array
from sfcpart.errors import FileError
from sfcpart.files.parts.boundary import groups_by_part
from sfcpart.files.parts.fields import as_written
from sfcpart.files.parts.lists import write_list_file
from sfcpart.files.parts.pieces import POLYHEDRON, Block, Renumbered, blocks, check_same_cells
from sfcpart.files.parts.supply import Supply
from sfcpart.slices.gate import agreed
from sfcpart.slices.mesh_slice import MeshSlice

if TYPE_CHECKING:
    from collections.abc import Mapping
    from os import PathLike

    from sfcpart.comm.base import Comm
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

    def without_rows(self) -> _Piece:
        """Return the forms of the arrays alone."""
        forms = {
            section: {name: array[:0] for name, array in arrays.items()}
            for section, arrays in self.sections.items()
        }
        return _Piece(forms, 0, 0)


def write_vtu_pieces(
    folder: str | PathLike[str],
    mesh: Mesh | MeshSlice,
    *,
    partition: Partition,
    halo: Halo,
    input_digest: str = "",
) -> None:
    """Write one VTU file a part, a PVTU that names them, and the exchange lists (collective).

    Parameters
    ----------
    folder : path
        An existing folder (see `sfcpart.files.parts.folder`).
    mesh : Mesh or MeshSlice
        Cell and point fields go along; without points, cells become vertices at their centres.
    partition : Partition
        Of the cells here.
    halo : Halo
        Of this rank's parts; it writes their pieces.
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
    held = mesh if isinstance(mesh, MeshSlice) else MeshSlice.whole(mesh)
    comm = held.comm
    check_same_cells(held, partition, halo)
    supply = Supply.of(held, partition)
    names = [f"pieces/part_{part:04d}.vtu" for part in range(partition.n_parts)]
    part = halo.first_part
    agreed(comm, partial(_make_folder, place))
    points_of_parts: list[Int64Array] = []
    example: _Piece | None = None
    for block in blocks(supply, halo):
        pieces = _pieces(block, supply)
        agreed(comm, partial(_write_pieces, place, names[part : part + len(pieces)], pieces))
        part += len(pieces)
        points_of_parts += [piece.sections["PointData"]["GlobalPointIds"] for piece in pieces]
        example = pieces[0].without_rows() if pieces else example
    example = _first_known(example, comm)
    agreed(comm, partial(_write_joint, place, example, names, comm))
    groups = list(groups_by_part(held, supply, halo, points_of_parts))
    write_list_file(place / "lists.h5", halo, comm=comm, groups=groups, input_digest=input_digest)


def _first_known(example: _Piece | None, comm: Comm) -> _Piece:
    """Return the lowest rank's example (collective): all pieces have the same arrays."""
    known = np.concatenate(comm.allgather(np.array([example is not None], np.int64)))
    found: _Piece = comm.bcast_object(example, int(np.argmax(known)))
    return found


def _pieces(block: Block, supply: Supply) -> list[_Piece]:
    """Fetch the points of a block and cut it into its parts."""
    used = block.points.used
    point_data = {
        "GlobalPointIds": supply.points.gids(used),
        **{
            name: as_written(supply.points.rows(field, used))
            for name, field in supply.point_fields.items()
        },
    }
    coordinates = supply.coordinates(used)
    return [_piece(block, k, coordinates, point_data) for k in range(block.n_parts)]


def _piece(block: Block, k: int, coordinates: Array, point_data: Mapping[str, Array]) -> _Piece:
    """Take the k-th part of a block."""
    rows = slice(block.cell_indptr[k], block.cell_indptr[k + 1])
    row, points = block.row[rows], _part_of(block.points, k, rows)
    mine = slice(block.points.used_indptr[k], block.points.used_indptr[k + 1])
    kind = block.cells.kind[row]
    cell_data: dict[str, Array] = {
        "vtkGhostType": block.ghost[rows],
        "GlobalCellIds": block.cell_gid[rows].astype(GID),
        "part": block.cells.part[row],
        **{name: as_written(field[row]) for name, field in block.cells.fields.items()},
    }
    shape: dict[str, Array] = {
        "connectivity": points.entries,
        "offsets": points.offsets[1:].astype(OFFSET),
        "types": kind,
    }
    if block.faces is not None and block.face_points is not None:
        faces = _part_of(block.faces, k, rows)
        face_rows = slice(block.faces.used_indptr[k], block.faces.used_indptr[k + 1])
        stream, end = _face_stream(faces, _part_of(block.face_points, k, face_rows))
        shape["faces"] = stream
        shape["faceoffsets"] = np.where(kind == POLYHEDRON, end, -1)
    sections: dict[str, Mapping[str, Array]] = {
        "Points": {"Points": coordinates[mine]},
        "Cells": shape,
        "PointData": {name: values[mine] for name, values in point_data.items()},
        "CellData": cell_data,
    }
    return _Piece(sections, n_points=len(points.used), n_cells=len(row))


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


def _saying_where(place: Path, act: Callable[[], None]) -> None:
    """Turn what the system says into an error that names the folder."""
    try:
        act()
    except FileError:
        raise
    except OSError as error:
        raise FileError(f"{place}: cannot be written: {error.strerror or error}") from error


def _make_folder(place: Path) -> None:
    """Make the folder of the pieces, if another rank has not."""
    _saying_where(place, lambda: (place / "pieces").mkdir(exist_ok=True))


def _write_pieces(place: Path, names: Sequence[str], pieces: Sequence[_Piece]) -> None:
    """Write some VTU files."""
    for name, piece in zip(names, pieces, strict=True):
        _saying_where(place, partial(_write_piece, place / name, piece))


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


def _write_joint(place: Path, example: _Piece, names: Sequence[str], comm: Comm) -> None:
    """Write the PVTU file, on rank 0; all pieces have the arrays of the example."""
    if comm.rank:
        return
    lines = [_OPENING.format(kind="PUnstructuredGrid"), '<PUnstructuredGrid GhostLevel="1">\n']
    for section in ("PointData", "CellData", "Points"):
        lines.append(f"<P{section}{_active(section)}>\n")
        for name, array in example.sections[section].items():
            lines.append(_array_tag("PDataArray", name, array) + "/>\n")
        lines.append(f"</P{section}>\n")
    lines.extend(f"<Piece Source={quoteattr(name)}/>\n" for name in names)
    lines.append("</PUnstructuredGrid>\n</VTKFile>\n")
    text = "".join(lines)
    _saying_where(place, lambda: _write_text(place / "parts.pvtu", text))


def _write_text(path: Path, text: str) -> None:
    """Write a file of text."""
    path.write_text(text, encoding="utf-8")


def _active(section: str) -> str:
    """Return the attribute that marks the global ids of a section."""
    return f' GlobalIds="{_ACTIVE[section]}"' if section in _ACTIVE else ""


def _array_tag(tag: str, name: str, array: Array) -> str:
    """Return the beginning of the element that describes an array."""
    kind = {"i": "Int", "u": "UInt", "f": "Float"}[array.dtype.kind]
    width = "" if array.ndim == 1 else f' NumberOfComponents="{array.shape[1]}"'
    return f'<{tag} type="{kind}{8 * array.dtype.itemsize}" Name={quoteattr(name)}{width}'
