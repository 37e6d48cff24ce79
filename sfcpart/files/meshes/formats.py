"""Tell the format of a mesh file: by its content where that is plain, else by its extension."""

from __future__ import annotations

import re
import stat
from collections.abc import Mapping
from os import PathLike, strerror
from pathlib import Path

from sfcpart.errors import FileError

__all__ = ["EXTENSIONS", "file_format", "head_of", "told"]

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

_HEAD = 4096
# Only signatures that no other format can begin with.
_SIGNATURES: tuple[tuple[str, re.Pattern[bytes]], ...] = (
    ("hdf5", re.compile(rb"\x89HDF\r\n\x1a\n")),
    ("vtk", re.compile(rb"# vtk DataFile Version")),
    ("gmsh", re.compile(rb"\s*\$(MeshFormat|Comments)\s")),
    ("ansys", re.compile(rb"\s*\([01]\s+\"")),
    ("ply", re.compile(rb"ply\r?\n")),
    ("medit", re.compile(rb"\s*MeshVersionFormatted\s")),
    ("off", re.compile(rb"OFF\s")),
    ("su2", re.compile(rb"(?:\s|%[^\r\n]*)*N(DIME|ZONE)\s*=")),
    ("pvtu", re.compile(rb"(?s).{0,1000}<VTKFile[^>]*type=.PUnstructuredGrid.")),
    ("vtu", re.compile(rb"(?s).{0,1000}<VTKFile[\s>]")),
    ("xdmf", re.compile(rb"(?s).{0,1000}<Xdmf[\s>]")),
    ("dolfin-xml", re.compile(rb"(?s).{0,1000}<dolfin[\s>]")),
)


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
    head = head_of(place)
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


def head_of(place: Path) -> bytes:
    """Return the first bytes of a file that must be there and hold something.

    Raises
    ------
    FileError
        If it is missing, no regular file, unreadable or empty.
    """
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
        raise FileError(f"{place}: cannot be read: {told(error)}") from error
    if not head:
        raise FileError(f"{place}: is empty; wanted a mesh file")
    return head


def told(error: Exception) -> str:
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
