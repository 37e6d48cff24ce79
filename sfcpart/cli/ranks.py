"""The command line under an MPI launcher: who works, who prints, what is read by whom.

The verbs in `TOGETHER` are run by all ranks on their slices of the mesh; any other is run by rank 0
while the others wait. Only rank 0 prints.
"""

from __future__ import annotations

import os
import sys
from collections.abc import Callable, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import click

from sfcpart.cli.console import hush, note
from sfcpart.launcher import launched, local_ranks

if TYPE_CHECKING:
    from sfcpart.mesh.mesh import Mesh
    from sfcpart.partition import Partition
    from sfcpart.slices.mesh_slice import MeshSlice

__all__ = [
    "TOGETHER",
    "hush_others",
    "is_spokesman",
    "once",
    "read_held",
    "run_alone",
    "share_threads",
    "whole_of",
]

TOGETHER = frozenset({"split", "assess", "inspect", "compare", "network"})
"""Verbs that all ranks run."""
_WITHOUT_MESH = frozenset({None, "completion", "figures", "manual"})


def hush_others() -> None:
    """Let rank 0 alone print; starts MPI."""
    if not is_spokesman():
        sys.stdout = Path(os.devnull).open("w", encoding="utf-8")  # noqa: SIM115 - to the end
        hush()


def is_spokesman() -> bool:
    """Tell whether this process is the one that prints and writes what is written once."""
    if not launched():
        return True
    from sfcpart.comm import world

    return world().rank == 0


def once(act: Callable[[], None]) -> None:
    """Do something on one rank; what goes wrong is raised on all."""
    if not launched():
        act()
        return
    from sfcpart.comm import world
    from sfcpart.slices.gate import agreed

    agreed(world(), lambda: act() if is_spokesman() else None)


def whole_of(
    mesh: Mesh | MeshSlice, partitions: Sequence[Partition]
) -> tuple[Mesh | None, list[Partition]]:
    """Return mesh and partitions as wholes, on the rank that draws (collective)."""
    from sfcpart.partition import Partition
    from sfcpart.slices.gathering import gather_mesh
    from sfcpart.slices.mesh_slice import MeshSlice
    from sfcpart.slices.routing import gather_rows

    if not isinstance(mesh, MeshSlice):
        return mesh, list(partitions)
    note("pictures and reports are made by rank 0, which gathers the mesh")
    whole = [Partition(gather_rows(mesh.comm, each.cell_part), each.n_parts) for each in partitions]
    return gather_mesh(mesh), whole


def share_threads() -> None:
    """Let the ranks of a node share its processors, unless the number of threads is set."""
    if not launched() or os.environ.get("SFCPART_THREADS"):
        return
    from sfcpart.kernels.threads import n_threads

    os.environ["SFCPART_THREADS"] = str(max(1, n_threads() // local_ranks()))


def run_alone(
    arguments: Sequence[str], act: Callable[[], None], tell: Callable[[Exception], tuple[str, int]]
) -> tuple[str, int]:
    """Run a verb on rank 0 while the others wait; return what went wrong, and the exit code."""
    from sfcpart.comm import world

    comm, ended = world(), ("", 0)
    if comm.rank == 0:
        verb = next((word for word in arguments if not word.startswith("-")), None)
        if verb not in _WITHOUT_MESH:
            note(f"{verb} runs on rank 0 alone, which must hold the mesh; other ranks wait")
        try:
            act()
        except click.exceptions.Exit as leave:
            ended = ("", leave.exit_code)
        except Exception as error:
            ended = tell(error)
    told: tuple[str, int] = comm.bcast_object(ended)
    return told


def read_held(path: str, *, merge_points: float | None = None) -> Mesh | MeshSlice:
    """Read a mesh, under a launcher this rank's slice of it."""
    if not launched():
        from sfcpart.cli.inputs import read_mesh

        return read_mesh(path, merge_points=merge_points)
    from sfcpart.comm import world
    from sfcpart.files.meshes.read_slice import is_read_by_slices, read_slice
    from sfcpart.slices.gate import agreed

    comm = world()
    by_slices = agreed(comm, lambda: is_read_by_slices(path)) and merge_points is None
    if by_slices:
        agreed(comm, lambda: _check_share(path, comm.size))
        return read_slice(path, comm=comm)
    return _spread(path, merge_points)


def _check_share(path: str, size: int) -> None:
    """Refuse a mesh of which the ranks of a node cannot hold their slices."""
    from sfcpart.memory import check_memory, memory_for_file

    whole = memory_for_file(path)
    check_memory(None if whole is None else whole * local_ranks() // size, path)


def _spread(path: str, merge_points: float | None) -> MeshSlice:
    """Read a mesh on rank 0 and spread it."""
    from sfcpart.cli.inputs import read_mesh
    from sfcpart.comm import world
    from sfcpart.slices.gate import agreed
    from sfcpart.slices.mesh_slice import scatter_mesh

    comm = world()
    note(f"{path} is read by rank 0, which must hold the mesh (VTKHDF is read by slices)")
    whole = agreed(
        comm, lambda: read_mesh(path, merge_points=merge_points) if comm.rank == 0 else None
    )
    return scatter_mesh(whole, comm)
