"""The one home of meshio: read what it reads, with its traps guarded, and write beside it.

Guarded here: readers that end the process (`SystemExit`) or raise anything at all become one
`FileError` line with meshio's own printed reason; its chatter does not reach the terminal;
elements it skips are an error; wedges are turned into VTK order; tags, physical names and
named sets are kept. Formats where meshio loses something (legacy VTK, VTU, SU2, VTKHDF) have
readers of their own and do not come here.
"""

from __future__ import annotations

import contextlib
import io
import itertools
import warnings
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from sfcpart.dtypes import KIND, OFFSET, Array, Int64Array, IntArray, index_dtype
from sfcpart.errors import FileError, MeshError, SfcpartError
from sfcpart.files.meshes.first_look import LOOKS
from sfcpart.files.meshes.limits import OutOfTimeError, interrupted_after, memory_limited
from sfcpart.files.meshes.raw import RawMesh, narrow_ids
from sfcpart.mesh.kinds import KINDS, POLYHEDRON, kind_of
from sfcpart.mesh.mesh import Polyhedra

__all__ = [
    "load_with_meshio",
    "meshio_of_raw",
    "quiet_meshio",
    "raw_of_meshio",
    "read_with_meshio",
    "save_with_meshio",
]

# meshio keeps the base triangle of a wedge so that it points inward, VTK so that it points
# outward (VTK file formats, linear cell types).
_WEDGE = (0, 2, 1, 3, 5, 4)

PATIENCE = 10.0
"""Seconds a reader may take, beside a second for every 100 kB of the file."""
_SLOWEST = 100_000  # bytes a second; the slowest text readers do about 10 MB/s


def read_with_meshio(path: Path, formats: Sequence[str]) -> RawMesh:
    """Read a file through meshio.

    Parameters
    ----------
    path : Path
    formats : sequence of str
        meshio's names of the formats to try, in turn.

    Raises
    ------
    FileError
        If no format fits; the message carries meshio's reason.
    MeshError
        If the file holds cells that cannot be used.
    """
    reasons = []
    for name in formats:
        try:
            return raw_of_meshio(load_with_meshio(path, name))
        except FileError as error:
            reasons.append(f"as {name}: {error}")
        except MeshError as error:
            raise MeshError(f"{path}: {error}") from error
    raise FileError(f"{path}: cannot be read {'; '.join(reasons)}")


def load_with_meshio(path: Path, name: str) -> Any:
    """Return the meshio mesh of a file in one format.

    Raises
    ------
    FileError
        If meshio cannot read it; the message does not name the file.
    """
    if name in LOOKS:
        LOOKS[name](path)
    limit = PATIENCE + path.stat().st_size / _SLOWEST
    with quiet_meshio() as chatter:
        import meshio

        _mend_gmsh22()
        with interrupted_after(limit), memory_limited(path):
            mesh = meshio.read(path, file_format=name)
    if "cannot handle" in chatter.getvalue():
        raise FileError(_reason(chatter.getvalue(), ""))
    return mesh


def _mend_gmsh22() -> None:
    """Let meshio 5.3 read fields of several blocks: it counts (name, table) pairs as 2 cells."""
    from meshio.gmsh import _gmsh22

    given = _gmsh22.cell_data_from_raw
    if getattr(given, "mended", False):
        return

    def mended(blocks: Any, fields: Any) -> Any:
        return given([b[1] if isinstance(b, (list, tuple)) else b for b in blocks], fields)

    mended.mended = True  # type: ignore[attr-defined]
    _gmsh22.cell_data_from_raw = mended


def save_with_meshio(path: Path, mesh: Any, name: str) -> None:
    """Write a meshio mesh in one format.

    Raises
    ------
    FileError
        If meshio cannot write it so.
    """
    options = {"data_format": "XML"} if name == "xdmf" else {}
    try:
        with quiet_meshio():
            import meshio

            meshio.write(path, mesh, file_format=name, **options)
    except FileError as error:
        raise FileError(f"{path}: cannot be written as {name}: {error}") from error


@contextlib.contextmanager
def quiet_meshio() -> Iterator[io.StringIO]:
    """Keep meshio's output off the terminal and turn whatever it raises into a FileError."""
    chatter = io.StringIO()
    try:
        with (
            contextlib.redirect_stdout(chatter),
            contextlib.redirect_stderr(chatter),
            warnings.catch_warnings(),
            np.errstate(all="ignore"),
        ):
            warnings.simplefilter("ignore")
            yield chatter
    except SfcpartError:
        raise
    except MemoryError as error:
        raise FileError(
            "asks for more memory than there is; it is damaged, or too large for this machine"
        ) from error
    except OutOfTimeError as error:
        raise FileError("reading it does not come to an end; it is damaged") from error
    except (Exception, SystemExit) as error:
        raise FileError(_reason(chatter.getvalue(), _told(error))) from error


def _told(error: BaseException) -> str:
    """Return what an exception says for itself, if anything."""
    if isinstance(error, SystemExit):
        return ""
    text = " ".join(str(error).split())
    return f"{type(error).__name__}: {text}" if text else ""


def _reason(chatter: str, told: str) -> str:
    """Make one line of what meshio printed and raised."""
    printed = " ".join(chatter.split()).partition("Error: Couldn't read file")[0].strip()
    text = " ".join(part for part in (printed, told) if part)
    return text[:300] or "the content does not follow the format (meshio gives no reason)"


def raw_of_meshio(mesh: Any) -> RawMesh:
    """Turn a meshio mesh into elements in file order.

    Raises
    ------
    MeshError
        If a block is of a kind that cannot be used, or has a wrong shape.
    """
    points = np.asarray(mesh.points)
    blocks = [_block(cells.type, cells.data, len(points)) for cells in mesh.cells]
    sizes = [len(indptr) - 1 for _, indptr, _ in blocks]
    kind = np.repeat(np.array([code for code, _, _ in blocks], KIND), sizes)
    first = np.cumsum([0, *sizes]).tolist()
    return RawMesh(
        points=points,
        kind=kind,
        indptr=_chained([indptr for _, indptr, _ in blocks]),
        indices=_joined([ids for _, _, ids in blocks], len(points)),
        polyhedra=_polyhedra(mesh.cells, len(points)),
        cell_fields=_cell_fields(mesh.cell_data, sizes),
        point_fields={name: np.asarray(values) for name, values in mesh.point_data.items()},
        names=_names(mesh),
        sets=_sets(mesh.cell_sets, first),
    )


def _block(name: str, data: Any, n_points: int) -> tuple[int, Int64Array, IntArray]:
    """Return code, offsets and ids of one block."""
    try:
        code = kind_of(name).code
    except MeshError:
        raise MeshError(f"holds {len(data)} cells of kind {name!r}, which cannot be used") from None
    if code == POLYHEDRON:
        return code, *_points_of_polyhedra(data, n_points)
    table = np.asarray(data)
    if table.ndim == 1 and len(table) == 0:
        table = table.reshape(0, 1)
    if table.ndim != 2 or table.dtype.kind not in "iu":
        raise MeshError(
            f"cells of kind {name!r} have shape {table.shape} and dtype {table.dtype}; "
            f"wanted a table of point ids"
        )
    if name == "wedge" and table.shape[1] == len(_WEDGE):
        table = table[:, _WEDGE]
    indptr = np.arange(0, table.size + 1, max(table.shape[1], 1), dtype=OFFSET)
    return code, indptr, narrow_ids(table.reshape(-1), n_points)


def _points_of_polyhedra(data: Any, n_points: int) -> tuple[Int64Array, IntArray]:
    """Return the points of each polyhedron, each once."""
    each = [np.unique(np.concatenate([np.asarray(face) for face in faces])) for faces in data]
    indptr = np.cumsum([0, *(len(ids) for ids in each)]).astype(OFFSET)
    return indptr, narrow_ids(np.concatenate([*each, np.zeros(0, np.int64)]), n_points)


def _polyhedra(blocks: Any, n_points: int) -> Polyhedra | None:
    """Return the faces of all polyhedra, with empty rows for other elements."""
    if not any(block.type.startswith("polyhedron") for block in blocks):
        return None
    faces: list[Array] = []
    per_cell: list[int] = []
    for block in blocks:
        if not block.type.startswith("polyhedron"):
            per_cell += [0] * len(block.data)
            continue
        for cell in block.data:
            per_cell.append(len(cell))
            faces += [np.asarray(face).reshape(-1) for face in cell]
    indices = np.concatenate([*faces, np.zeros(0, np.int64)])
    return Polyhedra(
        face_indptr=np.cumsum([0, *(len(face) for face in faces)]).astype(OFFSET),
        face_indices=narrow_ids(indices, n_points),
        cell_indptr=np.cumsum([0, *per_cell]).astype(OFFSET),
        cell_indices=np.arange(len(faces), dtype=index_dtype(len(faces))),
    )


def _chained(parts: Sequence[Int64Array]) -> Int64Array:
    """Chain the offsets of blocks."""
    if len(parts) == 1:
        return parts[0]
    widths = np.concatenate([np.zeros(1, OFFSET), *(np.diff(part) for part in parts)])
    return np.cumsum(widths)


def _joined(parts: Sequence[IntArray], n_points: int) -> IntArray:
    """Join the ids of blocks; a single block is not copied."""
    if len(parts) == 1:
        return parts[0]
    joined: IntArray = np.concatenate([np.zeros(0, index_dtype(n_points)), *parts])
    return joined


def _cell_fields(cell_data: Mapping[str, Any], sizes: Sequence[int]) -> dict[str, Array]:
    """Join the fields that have one shape in all blocks."""
    fields = {}
    for name, values in cell_data.items():
        pieces = [np.asarray(piece) for piece in values]
        shapes = {piece.shape[1:] for piece in pieces}
        if [len(piece) for piece in pieces] == list(sizes) and len(shapes) == 1:
            fields[name] = pieces[0] if len(pieces) == 1 else np.concatenate(pieces)
    return fields


def _names(mesh: Any) -> dict[tuple[int, int], str]:
    """Return what the file calls its tags: physical names, families, boundary names."""
    names = {}
    for name, value in mesh.field_data.items():
        pair = np.asarray(value)
        if pair.shape == (2,) and pair.dtype.kind in "iu":
            names[int(pair[1]), int(pair[0])] = str(name)
    for tag, called in getattr(mesh, "cell_tags", {}).items():
        for dim in range(4):
            names[dim, int(tag)] = ", ".join(map(str, called))
    return names


def _sets(cell_sets: Mapping[str, Any], first: Sequence[int]) -> dict[str, Int64Array]:
    """Return named sets as ids of elements in file order."""
    sets = {}
    for name, per_block in cell_sets.items():
        if name.startswith("gmsh:") or len(per_block) != len(first) - 1:
            continue
        ids = [np.zeros(0, np.int64)]
        for members, start, stop in zip(per_block, first, first[1:], strict=False):
            local = np.asarray(members if members is not None else [], np.int64).reshape(-1)
            ids.append(local[(local >= 0) & (local < stop - start)] + start)
        sets[name] = np.concatenate(ids)
    return sets


def meshio_of_raw(raw: RawMesh) -> Any:
    """Turn elements in file order into a meshio mesh: one block for each run of a kind and width.

    Raises
    ------
    FileError
        If there are polyhedra beside other cells, which meshio cannot write.
    """
    if raw.polyhedra is not None:
        raise FileError("polyhedra cannot be written in this format; use vtkhdf")
    with quiet_meshio():
        import meshio
    width = np.diff(raw.indptr)
    new = np.flatnonzero((np.diff(raw.kind) != 0) | (np.diff(width) != 0)) + 1
    cuts = [0, *new.tolist(), len(raw.kind)]
    blocks = []
    for start, stop in itertools.pairwise(cuts):
        name = KINDS[int(raw.kind[start])].name
        table = raw.indices[raw.indptr[start] : raw.indptr[stop]].reshape(stop - start, -1)
        blocks.append((name, table[:, _WEDGE] if name == "wedge" else table))
    fields = {name: np.split(values, cuts[1:-1]) for name, values in raw.cell_fields.items()}
    return meshio.Mesh(raw.points, blocks, point_data=dict(raw.point_fields), cell_data=fields)
