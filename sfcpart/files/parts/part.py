"""Load one part for a solver: its local mesh and its exchange lists, nothing else.

Cost: reads the rows of one part only, and a few numbers for every part.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int32Array, Int64Array, IntArray, KindArray
from sfcpart.errors import FileError, InputError
from sfcpart.files.hdf5 import read_hdf5
from sfcpart.files.parts.folder import MANIFEST
from sfcpart.files.parts.lists import PartBoundary, PartLists, read_lists
from sfcpart.files.parts.part_rows import PartRows, freeze, lists_fit, mesh_fits
from sfcpart.mesh.mesh import Polyhedra

if TYPE_CHECKING:
    from os import PathLike

__all__ = ["Part", "PartBoundary", "read_part"]

FILE_NAME = "parts.vtkhdf"


@dataclass(frozen=True, eq=False)
class Part:
    """What one rank of a solver needs (all arrays read-only).

    Cells are numbered locally: 0..n_owned-1 are owned, in curve order; the rest is the halo,
    grouped by owner.

    Attributes
    ----------
    part, n_parts : int
    n_owned : int
    points : (n_points, 3) float64
    kind : (n_cells,) uint8
        VTK type codes.
    indptr : (n_cells + 1,) int64
    indices : (sum,) int32 or int64
        Local points of each cell.
    polyhedra : Polyhedra or None
        Faces of the polyhedra, in local numbers.
    cell_gid : (n_cells,) int64
        Each cell's number in the unsplit mesh.
    point_gid : (n_points,) int64
    neighbour : (n_neighbours,) int32
        Parts to exchange with, ascending.
    send_indptr, send : CSR by neighbour
        Local owned cells to send, in order.
    receive_indptr, receive : CSR by neighbour
        Local halo cells to receive into, in the order in which they are sent.
    layers : int
    across : "faces" or "points"
    input_digest : str
    boundary : tuple of PartBoundary
        The elements of each boundary group that bound owned cells.
    cell_fields, point_fields : mapping of str to array
    """

    part: int
    n_parts: int
    n_owned: int
    points: FloatArray
    kind: KindArray
    indptr: Int64Array
    indices: IntArray
    polyhedra: Polyhedra | None
    cell_gid: Int64Array
    point_gid: Int64Array
    neighbour: Int32Array
    send_indptr: Int64Array
    send: IntArray
    receive_indptr: Int64Array
    receive: IntArray
    layers: int
    across: str
    input_digest: str
    boundary: tuple[PartBoundary, ...]
    cell_fields: Mapping[str, Array]
    point_fields: Mapping[str, Array]

    @property
    def n_cells(self) -> int:
        """Number of cells, owned and halo."""
        return len(self.kind)

    def send_list(self, neighbour: int) -> IntArray:
        """Return the local cells to send to a neighbour, in order.

        Parameters
        ----------
        neighbour : int
            A part of `self.neighbour`.

        Returns
        -------
        (n_sent,) int32 or int64

        Raises
        ------
        InputError
            If nothing is exchanged with that part.

        Examples
        --------
        See `read_part`.
        """
        at = self._position(neighbour)
        return self.send[self.send_indptr[at] : self.send_indptr[at + 1]]

    def receive_list(self, neighbour: int) -> IntArray:
        """Return the local cells to receive from a neighbour, in order.

        Parameters
        ----------
        neighbour : int
            A part of `self.neighbour`.

        Returns
        -------
        (n_received,) int32 or int64

        Raises
        ------
        InputError
            If nothing is exchanged with that part.

        Examples
        --------
        See `read_part`.
        """
        at = self._position(neighbour)
        return self.receive[self.receive_indptr[at] : self.receive_indptr[at + 1]]

    def _position(self, neighbour: int) -> int:
        """Return the place of a part among the neighbours."""
        at = int(np.searchsorted(self.neighbour, neighbour))
        if at == len(self.neighbour) or self.neighbour[at] != neighbour:
            raise InputError(
                f"part {self.part} exchanges nothing with part {neighbour}; its neighbours are "
                f"{self.neighbour.tolist()}"
            )
        return at


def read_part(path: str | PathLike[str], part: int) -> Part:
    """Load the local mesh and the exchange lists of one part.

    Parameters
    ----------
    path : path
        A folder that a split wrote, or its `parts.vtkhdf`.
    part : int
        The part, 0 <= part < n_parts; usually the rank.

    Returns
    -------
    Part

    Raises
    ------
    FileError
        If the file is missing, damaged, not from sfcpart, or has no such part.
    InputError
        If `part` is no whole number.

    Notes
    -----
    Only the part's rows are read. Any number of ranks may read one file at a time; start MPI
    before opening it.

    Examples
    --------
    >>> import tempfile
    >>> import sfcpart
    >>> from sfcpart.mesh.shapes import lattice
    >>> mesh = lattice((4, 1)).to_mesh()
    >>> with tempfile.TemporaryDirectory() as place:
    ...     folder = sfcpart.write_split(f"{place}/parts", mesh, sfcpart.split(mesh, 2))
    ...     part = sfcpart.read_part(folder, 0)
    >>> part.cell_gid.tolist(), part.send_list(1).tolist(), part.receive_list(1).tolist()
    ([0, 1, 2], [1], [2])
    """
    if isinstance(part, bool) or not isinstance(part, int | np.integer):
        raise InputError(f"part is {part!r}; wanted a whole number")
    place = Path(path)
    if place.is_dir():
        if not (place / FILE_NAME).exists():
            raise FileError(f"{place}: holds no {FILE_NAME}; {_instead(place)}")
        place = place / FILE_NAME
    with read_hdf5(place) as file:
        lists = read_lists(file, int(part))
        if "VTKHDF" not in file:
            raise FileError(f"{place}: holds exchange lists but no mesh; wanted {FILE_NAME}")
        arrays = PartRows(file["VTKHDF"], int(part)).read()
        return _checked(place, int(part), lists, arrays)


def _instead(folder: Path) -> str:
    """Say what to do about a folder without meshes for a solver."""
    if (folder / MANIFEST).exists():
        return "split again with the format vtkhdf (besides others, if wanted)"
    return "wanted a folder that a split wrote"


def _checked(place: Path, part: int, lists: PartLists, arrays: dict[str, Any]) -> Part:
    """Put mesh and lists together after a check that they fit each other."""
    if not (mesh_fits(lists, arrays) and lists_fit(lists, arrays)):
        raise FileError(f"{place}: mesh and exchange lists of part {part} do not fit; split again")
    about = ("n_parts", "n_owned", "layers", "across", "input_digest", "boundary")
    sides = ("neighbour", "send_indptr", "send", "receive_indptr", "receive")
    values = {name: getattr(lists, name) for name in (*about, *sides)}
    for group in lists.boundary:
        freeze(group.kind, group.indptr, group.indices, group.cell, group.element)
    freeze(*(values[name] for name in sides))
    freeze(*(array for array in arrays.values() if isinstance(array, np.ndarray)))
    return Part(part=part, **values, **arrays)
