"""What a rank's slice of a mesh can tell to the ranks that write parts.

Cells are asked for by global number. A point goes by its *slot*: the local number on a rank that
holds it, counted through over all ranks; one point may have slots on several ranks, which share its
global number. Faces of polyhedra have slots too. A mesh without points supplies a vertex at the
centre of each cell.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from sfcpart.comm.base import Comm
from sfcpart.dtypes import (
    COORDINATE,
    GID,
    KIND,
    OFFSET,
    Array,
    FloatArray,
    Int64Array,
    IntArray,
    KindArray,
    index_dtype,
)
from sfcpart.files.parts.fields import writable_fields
from sfcpart.mesh.kinds import VERTEX
from sfcpart.mesh.mesh import Polyhedra
from sfcpart.partition import Partition
from sfcpart.slices.mesh_slice import MeshSlice
from sfcpart.slices.routing import ask_rows, compact, dealing, owner_of, take_ragged

__all__ = ["CELL_NAMES", "POINT_NAMES", "CellRows", "Relation", "Slots", "Supply"]

CELL_NAMES = frozenset({"vtkGhostType", "GlobalCellIds", "part"})
POINT_NAMES = frozenset({"vtkGhostType", "GlobalPointIds"})


@dataclass(frozen=True, eq=False)
class Slots:
    """Things that several ranks may hold, by their slots.

    Attributes
    ----------
    comm : Comm
    first : (size + 1,) int64
        First slot of every rank.
    gid : (n_local,) int64
        Global number of each thing held here.
    n_items : int
        Of the whole mesh.
    """

    comm: Comm
    first: Int64Array
    gid: Int64Array
    n_items: int

    @classmethod
    def of(cls, gid: Int64Array | None, n_local: int, n_items: int, comm: Comm) -> Slots:
        """Count the slots of all ranks (collective)."""
        counts = np.concatenate(comm.allgather(np.array([n_local], GID)))
        first = np.concatenate(([0], np.cumsum(counts)))
        return cls(comm, first, np.arange(n_local, dtype=GID) if gid is None else gid, n_items)

    @property
    def shift(self) -> int:
        """First slot of this rank."""
        return int(self.first[self.comm.rank])

    @property
    def dtype(self) -> type[np.int32] | type[np.int64]:
        """Return what holds a slot."""
        return index_dtype(int(self.first[-1]))

    def gids(self, slots: IntArray) -> Int64Array:
        """Return global numbers (collective)."""
        return ask_rows(self.comm, self.gid, first=self.first, gid=slots)

    def rows(self, values: Array, slots: IntArray) -> Array:
        """Return rows of what has one row for each thing held here (collective)."""
        return ask_rows(self.comm, values, first=self.first, gid=slots)

    def same(self, slots: IntArray) -> tuple[IntArray, Int64Array]:
        """Number things, not slots (collective).

        Returns a small number for each entry, by ascending global number, and the lowest slot
        of each.
        """
        used, number = compact(slots)
        gid = self.gids(used)
        _, thing = compact(gid)
        lowest = np.empty(int(thing.max(initial=-1)) + 1, GID)
        lowest[thing[::-1]] = used[::-1]
        return thing[number], lowest


@dataclass(frozen=True, eq=False)
class Relation:
    """Rows of ids in CSR form."""

    indptr: Int64Array
    indices: IntArray


@dataclass(frozen=True, eq=False)
class CellRows:
    """Cells that were asked for, in the order asked.

    Attributes
    ----------
    kind : (n,) uint8
    part : (n,) int32
    fields : dict of str to (n, ...) array
    points, faces : Relation
        Slots of the points and, if the mesh has polyhedra, of the faces.
    """

    kind: KindArray
    part: Array
    fields: dict[str, Array]
    points: Relation
    faces: Relation | None


@dataclass(frozen=True, eq=False)
class Supply:
    """A slice of the mesh, its partition and fields, ready to be asked (all methods collective)."""

    comm: Comm
    rank_first: Int64Array
    kind: KindArray
    part: Array
    n_parts: int
    cells: Relation
    points: Slots
    positions: FloatArray
    cell_fields: Mapping[str, Array]
    point_fields: Mapping[str, Array]
    polyhedra: Polyhedra | None
    faces: Slots | None

    @classmethod
    def of(cls, held: MeshSlice, partition: Partition) -> Supply:
        """Look at a slice and the parts of its cells (collective)."""
        mesh, comm = held.mesh, held.comm
        cell_fields = writable_fields(mesh.cell_fields, CELL_NAMES)
        if mesh.points is None:
            n = held.n_local
            return cls(
                comm=comm,
                rank_first=held.rank_first,
                kind=np.full(n, VERTEX, KIND),
                part=partition.cell_part,
                n_parts=partition.n_parts,
                cells=Relation(np.arange(n + 1, dtype=OFFSET), np.arange(n, dtype=np.int32)),
                points=Slots(comm, held.rank_first, held.cell_gid, held.n_cells),
                positions=mesh.centers,
                cell_fields=cell_fields,
                point_fields={},
                polyhedra=None,
                faces=None,
            )
        solid, faces = mesh.polyhedra, None
        if solid is not None:
            faces = Slots.of(held.face_gid, len(solid.face_indptr) - 1, 0, comm)
        return cls(
            comm=comm,
            rank_first=held.rank_first,
            kind=mesh.kind,
            part=partition.cell_part,
            n_parts=partition.n_parts,
            cells=Relation(mesh.indptr, mesh.indices),
            points=Slots.of(held.point_gid, mesh.n_points, held.n_points, comm),
            positions=mesh.points,
            cell_fields=cell_fields,
            point_fields=writable_fields(mesh.point_fields, POINT_NAMES),
            polyhedra=solid,
            faces=faces,
        )

    def sizes(self, gid: Int64Array) -> tuple[Int64Array, Int64Array]:
        """Return how many points and how many faces some cells list."""
        own = [np.diff(self.cells.indptr)]
        own.append(0 * own[0] if self.polyhedra is None else np.diff(self.polyhedra.cell_indptr))
        rows = np.stack(own, axis=1).astype(np.int32)
        found = ask_rows(self.comm, rows, first=self.rank_first, gid=gid).astype(OFFSET)
        return found[:, 0], found[:, 1]

    def cell_rows(self, gid: Int64Array) -> CellRows:
        """Return everything about some cells."""
        way = dealing(self.comm, owner_of(gid, self.rank_first))
        wanted = way.forward(gid) - self.rank_first[self.comm.rank]

        def ids_of(indptr: Int64Array, ids: IntArray, slots: Slots) -> Relation:
            offset, found = take_ragged(indptr, ids, wanted)
            return Relation(*way.back_ragged(offset, _shifted(found, slots)))

        faces = None
        if self.polyhedra is not None and self.faces is not None:
            solid = self.polyhedra
            faces = ids_of(solid.cell_indptr, solid.cell_indices, self.faces)
        return CellRows(
            way.back(self.kind[wanted]),
            way.back(self.part[wanted]),
            {name: way.back(field[wanted]) for name, field in self.cell_fields.items()},
            ids_of(self.cells.indptr, self.cells.indices, self.points),
            faces,
        )

    def face_points(self, slots: Int64Array) -> Relation:
        """Return the points (slots) of some faces of polyhedra."""
        assert self.polyhedra is not None
        assert self.faces is not None
        solid = self.polyhedra
        way = dealing(self.comm, owner_of(slots, self.faces.first))
        wanted = way.forward(slots) - self.faces.shift
        offset, found = take_ragged(solid.face_indptr, solid.face_indices, wanted)
        return Relation(*way.back_ragged(offset, _shifted(found, self.points)))

    def coordinates(self, slots: IntArray) -> FloatArray:
        """Return points with three columns, zero where there are fewer."""
        found = self.points.rows(self.positions, slots)
        if found.shape[1] == 3:
            return found
        padded = np.zeros((len(found), 3), COORDINATE)
        padded[:, : found.shape[1]] = found
        return padded


def _shifted(local: IntArray, slots: Slots) -> IntArray:
    """Turn local numbers into slots."""
    if not slots.shift and local.dtype == slots.dtype:
        return local
    return np.add(local, slots.shift, dtype=slots.dtype)
