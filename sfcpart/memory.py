"""Is there memory enough for a split? Asked before the work, not found out in its middle.

What a split needs is estimated (`sfcpart.measure.memory`); what there is, Linux tells: memory
available and free swap, the limit of the control group, the limit of the process. Elsewhere nothing
is known and nothing refused.
"""

from __future__ import annotations

from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING

from sfcpart.errors import InsufficientMemoryError

if TYPE_CHECKING:
    from sfcpart.mesh.mesh import Mesh

__all__ = ["check_memory", "memory_for_file", "memory_for_mesh", "memory_left", "resident_memory"]

_PROC = Path("/proc")
_GROUPS = Path("/sys/fs/cgroup")
_SURE = 0.85
"""Share of an estimate needed for sure: measured peaks (300 000 hexahedra, as many tets) were
0.87 and 0.90 of it."""


def memory_for_file(path: str | PathLike[str]) -> int | None:
    """Estimate the peak memory of splitting a mesh file, without reading it.

    Parameters
    ----------
    path : path

    Returns
    -------
    int or None
        Bytes; None for formats that tell their size only when they are read: all but VTKHDF.

    Raises
    ------
    FileError
        If the file is missing or damaged.

    Examples
    --------
    >>> memory_for_file("no/such.vtkhdf")
    Traceback (most recent call last):
    sfcpart.errors.FileError: no/such.vtkhdf: cannot be read: No such file or directory
    """
    from sfcpart.files.meshes.formats import file_format

    if file_format(path)[0] != "vtkhdf":
        return None
    from sfcpart.files.meshes.vtkhdf_read import vtkhdf_counts
    from sfcpart.measure.memory import memory_of_counts

    found = vtkhdf_counts(path)
    return memory_of_counts(found.n_cells, n_faces=found.n_faces, held=found.n_bytes)


def memory_for_mesh(mesh: Mesh) -> int:
    """Estimate the peak memory of splitting, measuring and writing a mesh; bytes."""
    from sfcpart.measure.memory import split_memory

    return split_memory(mesh)


def check_memory(needed: int | None, what: str) -> None:
    """Refuse work that needs more memory than is left beside what this process holds already.

    Parameters
    ----------
    needed : int or None
        Bytes in all; None if unknown.
    what : str
        Begins the message, such as the name of the file.

    Raises
    ------
    InsufficientMemoryError
        If that much is not there.

    Examples
    --------
    >>> check_memory(10**18, "huge.vtkhdf")  # doctest: +ELLIPSIS
    Traceback (most recent call last):
    sfcpart.errors.InsufficientMemoryError: huge.vtkhdf: a split needs about 1e+09 GB ...
    """
    left = memory_left()
    if needed is None or left is None:
        return
    there = left + resident_memory()
    if _SURE * needed > there:
        raise InsufficientMemoryError(
            f"{what}: a split needs about {needed / 1e9:.2g} GB of memory, {there / 1e9:.2g} GB "
            "are there; close other programs or use a larger machine"
        )


def memory_left() -> int | None:
    """Return how many bytes this process may still take, None where the system does not tell."""
    told = _table(_PROC / "meminfo")
    if "MemAvailable" not in told:
        return None
    free = told["MemAvailable"] + told.get("SwapFree", 0)
    limits = (free, _left_in_group(), _left_of_address_space())
    return max(0, min(limit for limit in limits if limit is not None))


def resident_memory() -> int:
    """Return the bytes this process holds in memory, 0 where the system does not tell."""
    return _table(_PROC / "self" / "status").get("VmRSS", 0)


def _table(place: Path) -> dict[str, int]:
    """Read "name: number kB" lines as bytes (proc(5))."""
    try:
        lines = place.read_text().splitlines()
    except OSError:
        return {}
    words = [line.replace(":", " ").split() for line in lines if line.endswith(" kB")]
    return {row[0]: int(row[1]) * 1024 for row in words}


def _left_in_group() -> int | None:
    """Return what the control group of this process leaves (cgroups(7), versions 2 and 1)."""
    try:
        lines = (_PROC / "self" / "cgroup").read_text().splitlines()
    except OSError:
        return None
    left = None
    for line in lines:
        _, controllers, group = line.split(":", 2)
        if controllers and "memory" not in controllers.split(","):
            continue
        root = _GROUPS / "memory" if controllers else _GROUPS
        names = ("memory.max", "memory.current")
        if controllers:
            names = ("memory.limit_in_bytes", "memory.usage_in_bytes")
        for folder in (root / group.lstrip("/"), root):  # a container sees its group as the root
            most, used = (_number(folder / name) for name in names)
            if most is not None and used is not None:
                cached = _cached(folder / "memory.stat")
                left = min(most - used + cached, left if left is not None else most)
    return left


def _number(place: Path) -> int | None:
    """Read a whole number; "max" and missing files are none."""
    try:
        return int(place.read_text())
    except (OSError, ValueError):
        return None


def _cached(place: Path) -> int:
    """Return the bytes of a group that are copies of files and can be given back."""
    try:
        rows = dict(line.split() for line in place.read_text().splitlines())
    except (OSError, ValueError):
        return 0
    return int(rows.get("total_inactive_file", rows.get("inactive_file", 0)))


def _left_of_address_space() -> int | None:
    """Return what a limit on the process's address space leaves."""
    import resource

    most = resource.getrlimit(resource.RLIMIT_AS)[0]
    if most == resource.RLIM_INFINITY:
        return None
    return most - _table(_PROC / "self" / "status").get("VmSize", 0)
