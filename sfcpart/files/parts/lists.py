"""Exchange lists in HDF5: the group `/sfcpart`, beside the mesh or in a file of its own.

Attributes of the group: `format_version` (1), `n_parts`, `n_cells`, `layers`, `across` ("faces" or
"points"), `input_digest` (text that tells which mesh was split; may be empty).

Datasets (P parts, K pairs of a part and a neighbour):

- `owned_indptr`, `halo_indptr` (P+1): part p owns `owned_indptr[p+1] - owned_indptr[p]` cells,
  which come first in its local numbers, then its halo cells;
- `neighbour_indptr` (P+1), `neighbour` (K): the parts p exchanges with, ascending, are
  `neighbour[neighbour_indptr[p]:neighbour_indptr[p+1]]`; the row is the pair's number k;
- `receive_indptr` (K+1): pair k receives halo cells `receive_indptr[k]:receive_indptr[k+1]`,
  counted over all parts; subtract `halo_indptr[p]` and add the owned cells of p for local numbers;
- `send_indptr` (K+1), `send`: pair k sends the local cells
  `send[send_indptr[k]:send_indptr[k+1]]`, in the order in which the other side receives them;
- `boundary/0`, `boundary/1`, ...: one for each boundary group of the mesh, with the attributes
  `name` and `tag`. Rows `part_indptr[p]:part_indptr[p+1]` are the elements that bound cells which p
  owns: `kind` (VTK type code), `cell` (local number of the owned cell), `element` (number in the
  unsplit group) and local points `points[indptr[row]:indptr[row+1]]`;
- `cell_gid` (only in a file of its own): cell numbers of the unsplit mesh, for each part the owned
  cells and then the halo cells.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import Array, Int32Array, Int64Array, IntArray
from sfcpart.errors import FileError
from sfcpart.files.hdf5 import create_hdf5, read_text, write_text

if TYPE_CHECKING:
    from collections.abc import Iterable, Iterator
    from os import PathLike

    from sfcpart.files.parts.boundary import GroupByPart
    from sfcpart.halo import Halo

__all__ = [
    "FORMAT_VERSION",
    "GROUP",
    "PartBoundary",
    "PartLists",
    "read_lists",
    "write_groups",
    "write_list_file",
    "write_lists",
]

GROUP = "sfcpart"
FORMAT_VERSION = 1
_ARRAYS = (
    "owned_indptr",
    "halo_indptr",
    "neighbour_indptr",
    "neighbour",
    "receive_indptr",
    "send_indptr",
    "send",
)


@dataclass(frozen=True, eq=False)
class PartBoundary:
    """The elements of one boundary group that bound cells owned by one part.

    Attributes
    ----------
    name : str
    tag : int
        Number in the unsplit mesh, -1 if it had none.
    kind : (n,) uint8
        VTK type codes.
    indptr, indices : CSR
        Local points of each element.
    cell : (n,) int32 or int64
        Local number of the owned cell that each element bounds.
    element : (n,) int64
        Number of each element in the unsplit group.
    """

    name: str
    tag: int
    kind: Array
    indptr: Int64Array
    indices: IntArray
    cell: IntArray
    element: Int64Array


@dataclass(frozen=True, eq=False)
class PartLists:
    """The exchange lists of one part, in local numbers (see `sfcpart.files.parts.part.Part`)."""

    n_parts: int
    n_owned: int
    n_halo: int
    layers: int
    across: str
    input_digest: str
    neighbour: Int32Array
    receive_indptr: Int64Array
    receive: IntArray
    send_indptr: Int64Array
    send: IntArray
    boundary: tuple[PartBoundary, ...]


def write_lists(file: Any, halo: Halo, *, input_digest: str = "") -> None:
    """Write the group `/sfcpart` into an open HDF5 file.

    Parameters
    ----------
    file : h5py.File
    halo : Halo
    input_digest : str, optional
        Text that identifies the mesh that was split.
    """
    group = file.create_group(GROUP)
    group.attrs["format_version"] = FORMAT_VERSION
    group.attrs["n_parts"] = halo.n_parts
    group.attrs["n_cells"] = halo.n_cells
    group.attrs["layers"] = halo.layers
    write_text(group, "across", halo.across)
    write_text(group, "input_digest", input_digest)
    for name in _ARRAYS:
        group.create_dataset(name, data=getattr(halo, name))


def write_list_file(
    path: str | PathLike[str],
    halo: Halo,
    *,
    groups: Iterable[GroupByPart] = (),
    input_digest: str = "",
) -> None:
    """Write the exchange lists, with the cells they speak of, into a file of their own.

    Raises
    ------
    FileError
        If the file cannot be written.
    """
    with create_hdf5(path) as file:
        write_lists(file, halo, input_digest=input_digest)
        write_groups(file, groups)
        cells = [
            rows
            for part in range(halo.n_parts)
            for rows in (halo.owned_cells(part), halo.halo_cells(part))
        ]
        file[GROUP].create_dataset("cell_gid", data=np.concatenate(cells))


def read_lists(file: Any, part: int) -> PartLists:
    """Read the lists of one part from an open HDF5 file; only its own rows are read.

    Raises
    ------
    FileError
        If the file has no lists, was written by a newer sfcpart, or has no such part.
    """
    group = _group_of_lists(file)
    n_parts = int(group.attrs["n_parts"])
    if not 0 <= part < n_parts:
        raise FileError(
            f"{file.filename}: has no part {part}; its parts go from 0 to {n_parts - 1}"
        )
    n_owned = int(np.diff(group["owned_indptr"][part : part + 2])[0])
    halo_rows = group["halo_indptr"][part : part + 2]
    first, last = (int(row) for row in group["neighbour_indptr"][part : part + 2])
    receive_indptr = group["receive_indptr"][first : last + 1] - halo_rows[0]
    send_indptr = group["send_indptr"][first : last + 1]
    n_halo = int(halo_rows[1] - halo_rows[0])
    if not (n_owned >= 0 and 0 <= n_halo <= len(group["send"])):
        raise FileError(
            f"{file.filename}: part {part} has {n_owned} owned and {n_halo} halo cells; "
            "the file is damaged, split again"
        )
    return PartLists(
        n_parts=n_parts,
        n_owned=n_owned,
        n_halo=n_halo,
        layers=int(group.attrs["layers"]),
        across=read_text(group, "across"),
        input_digest=read_text(group, "input_digest"),
        neighbour=group["neighbour"][first:last],
        receive_indptr=receive_indptr,
        receive=np.arange(n_owned, n_owned + n_halo),
        send_indptr=send_indptr - send_indptr[0],
        send=group["send"][send_indptr[0] : send_indptr[-1]],
        boundary=tuple(_read_groups(group, part)),
    )


def _group_of_lists(file: Any) -> Any:
    """Return the group of the lists, of a format that is known."""
    if GROUP not in file:
        raise FileError(f"{file.filename}: has no group /{GROUP}; wanted a file that sfcpart wrote")
    version = int(file[GROUP].attrs["format_version"])
    if version > FORMAT_VERSION:
        raise FileError(
            f"{file.filename}: its lists have format {version} and this sfcpart reads up to "
            f"{FORMAT_VERSION}; use a newer sfcpart"
        )
    return file[GROUP]


def write_groups(file: Any, groups: Iterable[GroupByPart]) -> None:
    """Write boundary groups into the group `/sfcpart` of an open HDF5 file."""
    for number, rows in enumerate(groups):
        group = file[GROUP].create_group(f"boundary/{number}")
        write_text(group, "name", rows.name)
        group.attrs["tag"] = rows.tag
        for name in ("part_indptr", "element", "cell", "kind", "indptr", "points"):
            group.create_dataset(name, data=getattr(rows, name))


def _read_groups(group: Any, part: int) -> Iterator[PartBoundary]:
    """Read one part's elements of each boundary group."""
    for number in range(len(group.get("boundary", ()))):
        stored = group[f"boundary/{number}"]
        first, last = (int(row) for row in stored["part_indptr"][part : part + 2])
        indptr = stored["indptr"][first : last + 1]
        yield PartBoundary(
            name=read_text(stored, "name"),
            tag=int(stored.attrs["tag"]),
            kind=stored["kind"][first:last],
            indptr=indptr - indptr[0],
            indices=stored["points"][indptr[0] : indptr[-1]],
            cell=stored["cell"][first:last],
            element=stored["element"][first:last],
        )
