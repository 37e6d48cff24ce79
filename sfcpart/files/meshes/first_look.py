"""A first look at files of some formats: what meshio would get wrong is refused here.

Messages do not name the file; the caller does.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping
from pathlib import Path

from sfcpart.errors import FileError

__all__ = ["LOOKS"]

_HEADER = 1 << 16


def _refuse_collections(path: Path) -> None:
    """Refuse XDMF files with several grids, of which meshio would read none or one."""
    content = path.read_bytes()
    if re.search(rb"GridType\s*=\s*.(Collection|Tree)|CollectionType", content):
        raise FileError("is a collection of grids (time steps or pieces); wanted a single grid")


def _refuse_cut_stl(path: Path) -> None:
    """Refuse text STL without its last line: meshio would return the triangles that are left."""
    with path.open("rb") as file:
        if file.read(5) != b"solid":
            return
        file.seek(max(0, path.stat().st_size - 4096))
        if b"endsolid" not in file.read():
            raise FileError("does not end in 'endsolid'; it is cut short")


def _refuse_cut_ply(path: Path) -> None:
    """Refuse PLY without the end of its header: meshio would look for it for ever."""
    with path.open("rb") as file:
        if b"end_header" not in file.read(_HEADER):
            raise FileError("has no end_header; it is cut short or damaged")


LOOKS: Mapping[str, Callable[[Path], None]] = {
    "xdmf": _refuse_collections,
    "stl": _refuse_cut_stl,
    "ply": _refuse_cut_ply,
}
"""What to look at, by format."""
