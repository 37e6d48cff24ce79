"""Load one part for a solver: its local mesh and its exchange lists, nothing else.

Cost: reads the rows of one part only, and a few numbers for every part.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType
from typing import TYPE_CHECKING, Any

import numpy as np

from sfcpart.dtypes import OFFSET, Array, FloatArray, Int32Array, Int64Array, IntArray, KindArray
from sfcpart.errors import FileError, InputError
from sfcpart.files.hdf5 import read_hdf5
from sfcpart.files.parts.lists import PartBoundary, PartLists, read_lists
from sfcpart.mesh.mesh import Polyhedra

if TYPE_CHECKING:
    from os import PathLike

__all__ = ["Part", "PartBoundary", "read_part"]

FILE_NAME = "parts.vtkhdf"
_OWN_CELL_NAMES = frozenset({"vtkGhostType", "GlobalCellIds"})
_OWN_POINT_NAMES = frozenset({"vtkGhostType", "GlobalPointIds"})


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
            raise FileError(f"{place}: holds no {FILE_NAME}; wanted a folder that a split wrote")
        place = place / FILE_NAME
    with read_hdf5(place) as file:
        lists = read_lists(file, int(part))
        if "VTKHDF" not in file:
            raise FileError(f"{place}: holds exchange lists but no mesh; wanted {FILE_NAME}")
        arrays = _Slices(file["VTKHDF"], int(part)).read()
        return _checked(place, int(part), lists, arrays)


class _Slices:
    """The rows of one part in the datasets of `/VTKHDF`."""

    def __init__(self, root: Any, part: int) -> None:
        self.root, self.part = root, part

    def read(self) -> dict[str, Any]:
        """Read the local mesh with its fields."""
        cells, entries, points = (
            self._range(name)
            for name in ("NumberOfCells", "NumberOfConnectivityIds", "NumberOfPoints")
        )
        return {
            "kind": self.root["Types"][cells],
            "indptr": self._offsets("Offsets", cells),
            "indices": self.root["Connectivity"][entries],
            "points": self.root["Points"][points],
            "polyhedra": self._polyhedra(cells),
            "cell_gid": self.root["CellData/GlobalCellIds"][cells],
            "point_gid": self.root["PointData/GlobalPointIds"][points],
            "cell_fields": self._fields("CellData", cells, _OWN_CELL_NAMES),
            "point_fields": self._fields("PointData", points, _OWN_POINT_NAMES),
        }

    def _range(self, name: str) -> slice:
        """Return the rows of this part, given the number of rows of each part."""
        counts = self.root[name][: self.part + 1]
        last = int(counts.sum())
        return slice(last - int(counts[-1]), last)

    def _offsets(self, name: str, rows: slice) -> Int64Array:
        """Read offsets, of which each part has one more than rows."""
        moved = slice(rows.start + self.part, rows.stop + self.part + 1)
        return np.asarray(self.root[name][moved], OFFSET)

    def _fields(self, group: str, rows: slice, own: frozenset[str]) -> Mapping[str, Array]:
        """Read the fields that are not sfcpart's own marks."""
        names = [name for name in self.root[group] if name not in own]
        fields = {name: self.root[group][name][rows] for name in names}
        _freeze(*fields.values())
        return MappingProxyType(fields)

    def _polyhedra(self, cells: slice) -> Polyhedra | None:
        """Read the faces of the polyhedra, if there are any."""
        if "PolyhedronToFaces" not in self.root:
            return None
        faces, face_points, cell_faces = (
            self._range(name)
            for name in (
                "NumberOfFaces",
                "NumberOfFaceConnectivityIds",
                "NumberOfPolyhedronToFaceIds",
            )
        )
        arrays = (
            self._offsets("FaceOffsets", faces),
            self.root["FaceConnectivity"][face_points],
            self._offsets("PolyhedronOffsets", cells),
            self.root["PolyhedronToFaces"][cell_faces],
        )
        _freeze(*arrays)
        return Polyhedra(*arrays)


def _checked(place: Path, part: int, lists: PartLists, arrays: dict[str, Any]) -> Part:
    """Put mesh and lists together after a check that they fit each other."""
    if not (_mesh_fits(lists, arrays) and _lists_fit(lists, arrays)):
        raise FileError(f"{place}: mesh and exchange lists of part {part} do not fit; split again")
    about = ("n_parts", "n_owned", "layers", "across", "input_digest", "boundary")
    sides = ("neighbour", "send_indptr", "send", "receive_indptr", "receive")
    values = {name: getattr(lists, name) for name in (*about, *sides)}
    for group in lists.boundary:
        _freeze(group.kind, group.indptr, group.indices, group.cell, group.element)
    _freeze(*(values[name] for name in sides))
    _freeze(*(array for array in arrays.values() if isinstance(array, np.ndarray)))
    return Part(part=part, **values, **arrays)


def _mesh_fits(lists: PartLists, arrays: dict[str, Any]) -> bool:
    """Tell whether the local mesh is one and has the cells of the lists."""
    n_cells, n_points, solid = len(arrays["kind"]), len(arrays["points"]), arrays["polyhedra"]
    return (
        n_cells == lists.n_owned + lists.n_halo == len(arrays["cell_gid"])
        and n_points == len(arrays["point_gid"])
        and _are_rows(arrays["indptr"], n_cells, arrays["indices"], n_points)
        and (solid is None or _faces_fit(solid, n_cells, n_points))
    )


def _faces_fit(solid: Polyhedra, n_cells: int, n_points: int) -> bool:
    """Tell whether the faces of polyhedra are within range."""
    n_faces = len(solid.face_indptr) - 1
    return _are_rows(solid.cell_indptr, n_cells, solid.cell_indices, n_faces) and _are_rows(
        solid.face_indptr, n_faces, solid.face_indices, n_points
    )


def _lists_fit(lists: PartLists, arrays: dict[str, Any]) -> bool:
    """Tell whether the exchange lists and boundary groups are within range."""
    n_near, n_points = len(lists.neighbour), len(arrays["points"])
    last = lists.n_owned + lists.n_halo
    return (
        _within(lists.neighbour, lists.n_parts)
        and _are_rows(lists.send_indptr, n_near, lists.send, lists.n_owned)
        and _are_rows(lists.receive_indptr, n_near, lists.receive, last)
        and all(
            _are_rows(group.indptr, len(group.kind), group.indices, n_points)
            and len(group.cell) == len(group.kind) == len(group.element)
            and _within(group.cell, lists.n_owned)
            for group in lists.boundary
        )
    )


def _are_rows(indptr: Int64Array, n_rows: int, indices: IntArray, n_items: int) -> bool:
    """Tell whether CSR arrays are consistent and in range."""
    return (
        len(indptr) == n_rows + 1
        and indptr[0] == 0
        and indptr[-1] == len(indices)
        and bool(np.all(np.diff(indptr) >= 0))
        and _within(indices, n_items)
    )


def _within(indices: IntArray, n: int) -> bool:
    """Tell whether all indices are in range."""
    return len(indices) == 0 or bool(indices.min() >= 0 and indices.max() < n)


def _freeze(*arrays: Array) -> None:
    """Make arrays read-only."""
    for array in arrays:
        array.flags.writeable = False
