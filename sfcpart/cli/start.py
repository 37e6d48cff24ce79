"""The partition that `split --from` improves."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition
    from sfcpart.slices.mesh_slice import MeshSlice

__all__ = ["read_start"]


def read_start(mesh: Mesh | MeshSlice, place: str) -> Partition:
    """Return the parts of the cells held here, from a cell field of this name, or else a path."""
    from sfcpart.slices.mesh_slice import MeshSlice

    if not isinstance(mesh, MeshSlice):
        from sfcpart.cli.inputs import partition_from_place

        return partition_from_place(mesh.cell_fields, place, mesh.n_cells)
    from sfcpart.cli.sliced_parts import partition_of_slice

    if place in mesh.mesh.cell_fields:
        return partition_of_slice(mesh, None, place)
    return partition_of_slice(mesh, place, None)
