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
from itertools import pairwise
from pathlib import Path
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from sfcpart.dtypes import KIND, OFFSET, Array, Int32Array, Int64Array, IntArray, index_dtype
from sfcpart.errors import FileError
from sfcpart.files.hdf5 import read_text, write_text
from sfcpart.files.parts.turns import SharedHdf5, Table

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence
    from os import PathLike

    from sfcpart.comm.base import Comm
    from sfcpart.files.parts.boundary import GroupByPart
    from sfcpart.halo import Halo

__all__ = [
    "FORMAT_VERSION",
    "GROUP",
    "ListWriter",
    "PartBoundary",
    "PartLists",
    "read_lists",
    "write_list_file",
]

GROUP = "sfcpart"
FORMAT_VERSION = 1


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


class ListWriter:
    """Writes the group `/sfcpart`: laid out by rank 0, filled by the ranks that own parts.

    Parameters
    ----------
    shared : SharedHdf5
    halo : Halo
        Of this rank's parts.
    groups : sequence of GroupByPart
        Likewise.
    with_cells : bool
        Whether the cells of the parts are listed as well.
    """

    def __init__(
        self,
        shared: SharedHdf5,
        halo: Halo,
        groups: Sequence[GroupByPart],
        *,
        with_cells: bool = False,
    ) -> None:
        self.shared, self.halo, self.groups = shared, halo, groups
        self.arrays: dict[str, _Stretch] = {}
        comm, n_cells = shared.comm, self._sum(len(halo.owned))
        self._indptr("owned_indptr", halo.owned_indptr)
        self._indptr("halo_indptr", halo.halo_indptr)
        self._indptr("neighbour_indptr", halo.neighbour_indptr)
        self._rows("neighbour", halo.neighbour, np.int32)
        self._indptr("receive_indptr", halo.receive_indptr)
        self._indptr("send_indptr", halo.send_indptr)
        self._rows("send", halo.send, index_dtype(n_cells))
        for number, rows in enumerate(groups):
            self._group(f"boundary/{number}", rows, n_cells)
        if with_cells:
            self._rows("cell_gid", _cells_by_part(halo), index_dtype(n_cells))
        self.n_cells, self.n_parts = n_cells, self._sum(halo.n_parts)
        starts = [len(stretch.rows) for stretch in self.arrays.values()]
        counts = np.array(comm.allgather(np.array(starts, np.int64)))
        self.first = dict(zip(self.arrays, counts[: comm.rank].sum(axis=0).tolist(), strict=True))
        self.total = dict(zip(self.arrays, counts.sum(axis=0).tolist(), strict=True))

    def _sum(self, count: int) -> int:
        """Add up a number over ranks."""
        return int(self.shared.comm.allreduce(np.array([count], np.int64))[0])

    def _rows(self, name: str, rows: Array, dtype: Any) -> None:
        """Plan rows that follow those of the rank before."""
        self.arrays[name] = _Stretch(rows, np.dtype(dtype))

    def _indptr(self, name: str, indptr: Int64Array) -> None:
        """Plan offsets, which go on from those of the rank before; rank 0 writes the first."""
        before = self.shared.comm.exscan(indptr[-1:])
        own = indptr + before if self.shared.comm.rank == 0 else indptr[1:] + before
        self._rows(name, own, OFFSET)

    def _group(self, place: str, rows: GroupByPart, n_cells: int) -> None:
        """Plan one boundary group."""
        self._indptr(f"{place}/part_indptr", rows.part_indptr)
        self._rows(f"{place}/element", rows.element, OFFSET)
        self._rows(f"{place}/cell", rows.cell, index_dtype(n_cells))
        self._rows(f"{place}/kind", rows.kind, KIND)
        self._indptr(f"{place}/indptr", rows.indptr)
        self._rows(f"{place}/points", rows.points, index_dtype(rows.n_points))

    def tables(self) -> list[Table]:
        """Return the datasets to be laid out."""
        return [
            Table(f"{GROUP}/{name}", self.total[name], stretch.dtype)
            for name, stretch in self.arrays.items()
        ]

    def begin(self, file: Any, input_digest: str) -> None:
        """Write what is no dataset."""
        group = file.create_group(GROUP)
        group.attrs["format_version"] = FORMAT_VERSION
        group.attrs["n_parts"] = self.n_parts
        group.attrs["n_cells"] = self.n_cells
        group.attrs["layers"] = self.halo.layers
        write_text(group, "across", self.halo.across)
        write_text(group, "input_digest", input_digest)
        for number, rows in enumerate(self.groups):
            place = group.create_group(f"boundary/{number}")
            write_text(place, "name", rows.name)
            place.attrs["tag"] = rows.tag

    def fill(self) -> None:
        """Append this rank's rows."""
        for name, stretch in self.arrays.items():
            self.shared.column(f"{GROUP}/{name}", self.first[name]).append(stretch.rows)


class _Stretch(NamedTuple):
    """A rank's rows of a dataset."""

    rows: Array
    dtype: np.dtype[Any]


def _cells_by_part(halo: Halo) -> Array:
    """Return for each part of this rank its owned cells and then its halo cells."""
    lists = [
        rows
        for owned, far in zip(pairwise(halo.owned_indptr), pairwise(halo.halo_indptr), strict=True)
        for rows in (halo.owned[owned[0] : owned[1]], halo.halo[far[0] : far[1]])
    ]
    return np.concatenate([halo.owned[:0], *lists])


def write_list_file(
    path: str | PathLike[str],
    halo: Halo,
    *,
    comm: Comm,
    groups: Sequence[GroupByPart] = (),
    input_digest: str = "",
) -> None:
    """Write the exchange lists, with the cells they speak of, into a file of their own.

    Parameters
    ----------
    path : path
    halo : Halo
        Of this rank's parts.
    comm : Comm
    groups : sequence of GroupByPart, optional
    input_digest : str, optional
        Text that identifies the mesh that was split.

    Raises
    ------
    FileError
        If the file cannot be written.
    """
    shared = SharedHdf5(Path(path), comm)
    lists = ListWriter(shared, halo, groups, with_cells=True)
    shared.lay_out(lists.tables(), lambda file: lists.begin(file, input_digest))
    lists.fill()
    shared.flush()


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
