"""The rows of one part in a file of all parts, and whether mesh and lists fit each other."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Any

import numpy as np

from sfcpart.dtypes import OFFSET, Array, Int64Array, IntArray
from sfcpart.files.parts.lists import PartLists
from sfcpart.mesh.mesh import Polyhedra

__all__ = ["PartRows", "freeze", "lists_fit", "mesh_fits"]

_OWN_CELL_NAMES = frozenset({"vtkGhostType", "GlobalCellIds"})
_OWN_POINT_NAMES = frozenset({"vtkGhostType", "GlobalPointIds"})


class PartRows:
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
        freeze(*fields.values())
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
        freeze(*arrays)
        return Polyhedra(*arrays)


def mesh_fits(lists: PartLists, arrays: dict[str, Any]) -> bool:
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


def lists_fit(lists: PartLists, arrays: dict[str, Any]) -> bool:
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


def freeze(*arrays: Array) -> None:
    """Make arrays read-only."""
    for array in arrays:
        array.flags.writeable = False
