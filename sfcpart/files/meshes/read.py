"""Read a mesh, or values of its cells, from a file of any format that is known.

The content decides where it is unmistakable (HDF5, VTK, VTU, Gmsh, SU2, ...), the extension
where it is not. Whatever is wrong with a file ends in one line that names it.
"""

from __future__ import annotations

import re
import stat
from collections.abc import Callable, Mapping
from importlib import import_module
from os import PathLike, strerror
from pathlib import Path

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import FileError, InputError, SfcpartError
from sfcpart.files.meshes.assemble import build_mesh
from sfcpart.files.meshes.raw import RawMesh
from sfcpart.mesh.mesh import Mesh

__all__ = ["EXTENSIONS", "file_format", "read_cell_values", "read_mesh"]

EXTENSIONS: Mapping[str, tuple[str, ...]] = {
    ".vtkhdf": ("vtkhdf",),
    ".h5": ("hdf5",),
    ".hdf5": ("hdf5",),
    ".hdf": ("hdf5",),
    ".vtu": ("vtu",),
    ".pvtu": ("pvtu",),
    ".vtk": ("vtk",),
    ".su2": ("su2",),
    ".msh": ("gmsh", "ansys"),
    ".xdmf": ("xdmf",),
    ".xmf": ("xdmf",),
    ".ply": ("ply",),
    ".mesh": ("medit",),
    ".meshb": ("medit",),
    ".inp": ("abaqus",),
    ".ugrid": ("ugrid",),
    ".med": ("med",),
    ".cgns": ("cgns",),
    ".e": ("exodus",),
    ".exo": ("exodus",),
    ".ex2": ("exodus",),
    ".stl": ("stl",),
    ".obj": ("obj",),
    ".off": ("off",),
    ".bdf": ("nastran",),
    ".nas": ("nastran",),
    ".fem": ("nastran",),
    ".avs": ("avsucd",),
    ".vol": ("netgen",),
    ".vol.gz": ("netgen",),
    ".node": ("tetgen",),
    ".ele": ("tetgen",),
    ".mdpa": ("mdpa",),
    ".h5m": ("h5m",),
    ".hmf": ("hmf",),
    ".dat": ("tecplot",),
    ".tec": ("tecplot",),
    ".xml": ("dolfin-xml",),
    ".f3grid": ("flac3d",),
    ".wkt": ("wkt",),
    ".post": ("permas",),
    ".post.gz": ("permas",),
    ".dato": ("permas",),
    ".dato.gz": ("permas",),
}
"""Formats to try for each file extension, in turn; names as meshio has them."""

_OWN: Mapping[str, tuple[str, str]] = {
    "vtkhdf": ("sfcpart.files.meshes.vtkhdf_read", "read_vtkhdf"),
    "vtu": ("sfcpart.files.meshes.vtu_read", "read_vtu"),
    "pvtu": ("sfcpart.files.meshes.vtu_read", "read_pvtu"),
    "vtk": ("sfcpart.files.meshes.vtk_read", "read_vtk"),
    "su2": ("sfcpart.files.meshes.su2_read", "read_su2"),
}
_HEAD = 4096
# Only signatures that no other format can begin with.
_SIGNATURES: tuple[tuple[str, re.Pattern[bytes]], ...] = (
    ("hdf5", re.compile(rb"\x89HDF\r\n\x1a\n")),
    ("vtk", re.compile(rb"# vtk DataFile Version")),
    ("gmsh", re.compile(rb"\s*\$(MeshFormat|Comments)\s")),
    ("ply", re.compile(rb"ply\r?\n")),
    ("medit", re.compile(rb"\s*MeshVersionFormatted\s")),
    ("off", re.compile(rb"OFF\s")),
    ("su2", re.compile(rb"(?:\s|%[^\r\n]*)*N(DIME|ZONE)\s*=")),
    ("pvtu", re.compile(rb"(?s).{0,1000}<VTKFile[^>]*type=.PUnstructuredGrid.")),
    ("vtu", re.compile(rb"(?s).{0,1000}<VTKFile[\s>]")),
    ("xdmf", re.compile(rb"(?s).{0,1000}<Xdmf[\s>]")),
    ("dolfin-xml", re.compile(rb"(?s).{0,1000}<dolfin[\s>]")),
)


def read_mesh(path: str | PathLike[str]) -> Mesh:
    """Read a mesh from a file.

    Parameters
    ----------
    path : path
        VTKHDF, VTU, legacy VTK, SU2, faces in HDF5 (`sfcpart.files.meshes.faces_file`), or one of
        the formats meshio reads. Content that gives itself away wins over the extension.

    Returns
    -------
    Mesh
        Cells in the file's own order; elements of lower dimension as boundary groups with the
        names and tags of the file; its cell and point fields that hold numbers.

    Raises
    ------
    FileError
        If the file is missing, empty, unreadable, cut short, damaged, of unknown format, or
        of a variant that cannot be read.
    MeshError
        If it has no cells, cells of kinds that cannot be used, coordinates that are not finite
        (which point), or ids out of range.

    Notes
    -----
    Memory: the arrays of the mesh, and once more the arrays of one format (VTKHDF excepted).

    Examples
    --------
    >>> import tempfile
    >>> from sfcpart.files.meshes.faces_file import write_faces
    >>> bar = Mesh.from_faces([[0, 1], [1, -1]], [2.0, 1.0], [[0, 0], [1, 0]], [1.0, 1.0])
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_faces(f"{folder}/bar.h5", bar)
    ...     read_mesh(f"{folder}/bar.h5").n_cells
    2
    """
    place = Path(path)
    formats = file_format(place)
    if formats[0] == "faces":
        from sfcpart.files.meshes.faces_file import read_faces

        return read_faces(place)
    return build_mesh(_read_raw(place, formats), str(place))


def _read_raw(place: Path, formats: tuple[str, ...]) -> RawMesh:
    """Call the reader of a format; nothing but our errors comes out."""
    try:
        return _reader(formats)(place)
    except SfcpartError:
        raise
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {_told(error)}") from error
    except MemoryError as error:
        raise FileError(
            f"{place}: asks for more memory than there is; it is damaged, or too large"
        ) from error
    except (ValueError, LookupError, TypeError, ArithmeticError) as error:
        # The net under the readers; the tests with damaged files count a fall into it as a fault.
        raise FileError(
            f"{place}: is damaged in a way not foreseen ({type(error).__name__}: {error})"
        ) from error


def _reader(formats: tuple[str, ...]) -> Callable[[Path], RawMesh]:
    """Return the reader of a format; the module it is in is loaded now."""
    module, name = _OWN.get(formats[0], ("", ""))
    if module:
        reader: Callable[[Path], RawMesh] = getattr(import_module(module), name)
        return reader
    from sfcpart.files.meshes.meshio_files import read_with_meshio

    return lambda place: read_with_meshio(place, formats)


def file_format(path: str | PathLike[str]) -> tuple[str, ...]:
    """Return the formats a file may have, most likely first.

    Raises
    ------
    FileError
        If there is no such file, it cannot be read, is empty, or its format is unknown.

    Examples
    --------
    >>> file_format("no/such.vtu")
    Traceback (most recent call last):
    sfcpart.errors.FileError: no/such.vtu: cannot be read: No such file or directory
    """
    place = Path(path)
    head = _head(place)
    by_name = _by_extension(place)
    by_content = next((name for name, pattern in _SIGNATURES if pattern.match(head)), None)
    if by_content == "hdf5":
        return (_hdf5_format(place, by_name),)
    if by_content is not None:
        return (by_content,)
    if not by_name:
        known = " ".join(EXTENSIONS)
        raise FileError(
            f"{place}: has an unknown format (extension {place.suffix or 'none'}); known: {known}"
        )
    if by_name[0] in ("vtkhdf", "hdf5", "vtu", "pvtu", "vtk"):
        raise FileError(
            f"{place}: is no {by_name[0].upper()} file although it is called so; it is damaged "
            f"or of another format"
        )
    return by_name


def _head(place: Path) -> bytes:
    """Return the first bytes of a file that must be there and hold something."""
    try:
        mode = place.stat().st_mode
        if stat.S_ISDIR(mode):
            raise FileError(f"{place}: is a folder; wanted a mesh file")
        if not stat.S_ISREG(mode):
            raise FileError(f"{place}: is no regular file; wanted a mesh file")
        with place.open("rb") as file:
            head = file.read(_HEAD)
    except FileError:
        raise
    except (OSError, ValueError) as error:
        raise FileError(f"{place}: cannot be read: {_told(error)}") from error
    if not head:
        raise FileError(f"{place}: is empty; wanted a mesh file")
    return head


def _told(error: Exception) -> str:
    """Return what the system says, without the path."""
    number = getattr(error, "errno", None)
    return strerror(number) if number else str(error)


def _by_extension(place: Path) -> tuple[str, ...]:
    """Return the formats that go with the extension (the last two for packed files)."""
    suffixes = [suffix.lower() for suffix in place.suffixes]
    return EXTENSIONS.get("".join(suffixes[-2:]), EXTENSIONS.get("".join(suffixes[-1:]), ()))


def _hdf5_format(place: Path, by_name: tuple[str, ...]) -> str:
    """Tell by its groups what sort of HDF5 a file is."""
    from sfcpart.files.hdf5 import read_hdf5

    with read_hdf5(place) as file:
        members = set(file)
    if "VTKHDF" in members:
        return "vtkhdf"
    if "faces_mesh" in members:
        return "faces"
    if by_name and by_name[0] in ("med", "h5m", "hmf", "cgns", "exodus"):
        return by_name[0]
    inside = ", ".join(sorted(members)[:8]) or "nothing"
    raise FileError(
        f"{place}: is HDF5, but holds no mesh that is known (it has {inside}); "
        f"wanted a group VTKHDF or faces_mesh"
    )


def read_cell_values(path: str | PathLike[str], n_cells: int) -> Array:
    r"""Read one number a cell: parts, weights, groups.

    Parameters
    ----------
    path : path
        `.npy` (one row of numbers), or text: one number a line, `#` begins a comment; a `.csv`
        may begin with a line of heading.
    n_cells : int
        How many numbers there must be.

    Returns
    -------
    (n_cells,) int64 or float64
        Integers if all are written as integers.

    Raises
    ------
    FileError
        If the file cannot be read or holds something else than numbers.
    InputError
        If the number of values is not the number of cells.

    Examples
    --------
    >>> import tempfile
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     _ = Path(folder, "cell_part.txt").write_text("0\n0\n1  # the last cell\n")
    ...     read_cell_values(Path(folder, "cell_part.txt"), 3)
    array([0, 0, 1])
    """
    place = Path(path)
    head = _head(place)
    try:
        values = _npy(place) if head[:6] == b"\x93NUMPY" else _text_values(place)
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {_told(error)}") from error
    if values.shape != (n_cells,):
        raise InputError(
            f"{place}: holds {'x'.join(map(str, values.shape))} values; "
            f"wanted {n_cells}, one a cell, in the mesh's order"
        )
    return values


def _npy(place: Path) -> Array:
    """Read a .npy array of numbers, never objects."""
    try:
        mapped = np.load(place, mmap_mode="r", allow_pickle=False)
    except (ValueError, EOFError, SyntaxError, TypeError) as error:
        raise FileError(f"{place}: is no usable .npy file: {error}") from error
    if mapped.dtype.kind not in "biuf":
        raise FileError(f"{place}: holds {mapped.dtype} values; wanted integers or reals")
    wide = np.float64 if mapped.dtype.kind == "f" else np.int64
    values = np.array(mapped)
    if values.ndim == 2 and 1 in values.shape:
        values = values.reshape(-1)
    if values.dtype == np.uint64 and values.size and values.max() > np.iinfo(np.int64).max:
        raise FileError(f"{place}: holds {values.max()}; the largest integer is 2**63 - 1")
    return values.astype(wide, copy=False)


def _text_values(place: Path) -> Array:
    """Read one number a line."""
    try:
        lines = place.read_text("utf-8-sig").splitlines()
    except UnicodeDecodeError as error:
        raise FileError(f"{place}: is neither .npy nor text; wanted one number a line") from error
    words = [line.partition("#")[0].strip().rstrip(",;").strip() for line in lines]
    rows = [(row, word) for row, word in enumerate(words, 1) if word]
    if rows and place.suffix.lower() == ".csv" and not _is_number(rows[0][1]):
        rows = rows[1:]
    texts = [word for _, word in rows]
    for dtype in (np.int64, np.float64):
        try:
            return np.array(texts, dtype=object).astype(dtype) if texts else np.zeros(0, dtype)
        except (ValueError, OverflowError):
            continue
    row, word = next((row, word) for row, word in rows if not _is_number(word))
    raise FileError(f"{place}: line {row} is {word[:40]!r}; wanted one number a line")


def _is_number(word: str) -> bool:
    """Tell whether a word is a number."""
    try:
        float(word)
    except ValueError:
        return False
    return True
