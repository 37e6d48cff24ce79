"""The list of files in a PVD collection (VTK's own XML format for time series)."""

from __future__ import annotations

from os import PathLike
from pathlib import Path
from xml.etree import ElementTree

from sfcpart.errors import FileError

__all__ = ["pvd_files"]


def pvd_files(path: str | PathLike[str]) -> list[Path]:
    """Return the mesh files of a collection in order of time, paths resolved beside it.

    Raises
    ------
    FileError
        If the file cannot be read, is no collection, or names two files for one time.
    """
    place = Path(path)
    try:
        root = ElementTree.fromstring(place.read_bytes())
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {error.strerror or error}") from error
    except ElementTree.ParseError as error:
        raise FileError(f"{place}: is no XML: {error}") from error
    if root.tag != "VTKFile" or root.get("type") != "Collection":
        raise FileError(f"{place}: is no PVD file; wanted VTKFile of type Collection")
    found: list[tuple[float, str]] = []
    for row, entry in enumerate(root.iter("DataSet")):
        name, time = entry.get("file"), entry.get("timestep", str(row))
        try:
            found.append((float(time), name or ""))
        except ValueError:
            raise FileError(f"{place}: timestep {time!r} is no number") from None
        if not name:
            raise FileError(f"{place}: entry {row} names no file")
    times = [time for time, _ in found]
    if len(set(times)) < len(times):
        twice = next(time for time in times if times.count(time) > 1)
        raise FileError(f"{place}: several files at time {twice:g}; wanted one a time")
    return [place.parent / name for _, name in sorted(found)]
