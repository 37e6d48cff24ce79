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
from collections.abc import Iterator, Sequence
from pathlib import Path
from typing import Any

import numpy as np

from sfcpart.errors import FileError, MeshError, SfcpartError
from sfcpart.files.meshes.first_look import LOOKS
from sfcpart.files.meshes.limits import OutOfTimeError, interrupted_after, memory_limited
from sfcpart.files.meshes.meshio_blocks import WEDGE, raw_of_meshio
from sfcpart.files.meshes.raw import RawMesh
from sfcpart.mesh.kinds import KINDS

__all__ = [
    "load_with_meshio",
    "meshio_of_raw",
    "quiet_meshio",
    "read_with_meshio",
    "save_with_meshio",
]

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
        blocks.append((name, table[:, WEDGE] if name == "wedge" else table))
    fields = {name: np.split(values, cuts[1:-1]) for name, values in raw.cell_fields.items()}
    return meshio.Mesh(raw.points, blocks, point_data=dict(raw.point_fields), cell_data=fields)
