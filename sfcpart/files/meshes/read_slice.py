"""Read a rank's slice of a mesh from a file of any format that is known.

VTKHDF and faces in HDF5 are read by slices; other formats by rank 0, which spreads the mesh.
"""

from __future__ import annotations

from collections.abc import Mapping
from importlib import import_module
from os import PathLike
from pathlib import Path
from typing import Any

from sfcpart.comm import adopt, world
from sfcpart.files.meshes.formats import file_format
from sfcpart.files.meshes.read import read_mesh
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.gate import agreed
from sfcpart.slices.mesh_slice import MeshSlice, scatter_mesh

__all__ = ["is_read_by_slices", "read_slice"]

_BY_SLICES: Mapping[str, tuple[str, str]] = {
    "vtkhdf": ("sfcpart.files.meshes.vtkhdf_slices", "read_vtkhdf_slice"),
    "faces": ("sfcpart.files.meshes.faces_slices", "read_faces_slice"),
}


def is_read_by_slices(path: str | PathLike[str]) -> bool:
    """Tell whether ranks read their slices of a file themselves.

    Raises
    ------
    FileError
        If the file is missing, empty or of an unknown format.
    """
    return file_format(path)[0] in _BY_SLICES


def read_slice(path: str | PathLike[str], *, comm: Any = None) -> MeshSlice:
    """Read this rank's slice of a mesh (collective).

    Parameters
    ----------
    path : path
        The same file on all ranks; any format of `read_mesh`.
    comm : Comm, or mpi4py communicator, optional
        Ranks that share the mesh; all of this job by default.

    Returns
    -------
    MeshSlice
        Consecutive cells in file order. Points that no cell uses and boundary elements that no
        cell holds are on no rank.

    Raises
    ------
    FileError, MeshError
        As `read_mesh`, on all ranks alike.

    Notes
    -----
    VTKHDF and faces in HDF5 (`sfcpart.files.meshes.faces_file`): memory falls as 1/ranks. Any
    other format must fit the memory of rank 0, which reads it alone.

    Examples
    --------
    >>> import tempfile
    >>> from sfcpart.comm import run_ranks
    >>> from sfcpart.files.meshes.faces_file import write_faces
    >>> bar = Mesh.from_faces([[0, 1], [1, -1]], [2.0, 1.0], [[0, 0], [1, 0]], [1.0, 1.0])
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_faces(f"{folder}/bar.h5", bar)
    ...     run_ranks(2, lambda comm: read_slice(f"{folder}/bar.h5", comm=comm).n_local)
    [1, 1]
    """
    place, comm = Path(path), world() if comm is None else adopt(comm)
    formats = agreed(comm, lambda: file_format(place))
    if formats[0] in _BY_SLICES:
        module, name = _BY_SLICES[formats[0]]
        held: MeshSlice = getattr(import_module(module), name)(place, comm)
        return held
    whole: Mesh | None = agreed(comm, lambda: read_mesh(place) if comm.rank == 0 else None)
    return scatter_mesh(whole, comm)
