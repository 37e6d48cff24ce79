"""Hand a split over: the verb `write_split`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING, Any

from sfcpart.api.judge import assess, graph_of, rows_of_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from sfcpart.slices.mesh_slice import MeshSlice

if TYPE_CHECKING:
    from sfcpart.halo import Across
    from sfcpart.measure import Assessment

__all__ = ["write_split"]


def write_split(
    folder: str | PathLike[str],
    mesh: Mesh | MeshSlice,
    partition: Partition,
    *,
    assessment: Assessment | None = None,
    formats: Sequence[str] = ("vtkhdf",),
    layers: int = 1,
    across: Across = "faces",
    overwrite: bool = False,
    picture: bool = False,
    report: bool = False,
    compress: bool = False,
    title: str | None = None,
    source: str | PathLike[str] | None = None,
    options: Mapping[str, Any] | None = None,
) -> Path:
    """Write the parts and their figures into a folder that appears complete or not at all.

    Parameters
    ----------
    folder : path
        The folder to make; refused if it holds something, unless `overwrite` and all of it was
        written by sfcpart.
    mesh : Mesh or MeshSlice
        With a slice all ranks write together (`sfcpart.read_slice`), the same bytes as one.
    partition : Partition
        Of the cells here.
    assessment : Assessment, optional
        Figures to write; measured with defaults if missing.
    formats : sequence of {"vtkhdf", "vtu", "same"}
        One VTKHDF file with ghost cells and exchange lists; VTU pieces with a PVTU; or the
        input's own format with a `part` field (needs `source`): `parts` with the input's
        extension, but `mesh.vtkhdf` for VTKHDF.
    layers, across : int, {"faces", "points"}
        Depth of the halo, and what it grows across.
    overwrite, picture, report, compress : bool
        Whether to replace an earlier result, to draw `parts.png`, to write the page `report.html`,
        to pack the VTKHDF file.
    title : str, optional
        First line of picture and page; by default the name of `source`, or the number of parts.
    source : path, optional
        The mesh file; its digest goes into `summary.json`.
    options : mapping, optional
        What the split was asked for, for `summary.json`.

    Returns
    -------
    pathlib.Path
        The folder.

    Raises
    ------
    InputError
        If a format is unknown, or `source` is missing where it is needed.
    FileError
        If the folder is refused or cannot be written; nothing is left behind then.

    Notes
    -----
    O(n_cells + halo) time; memory for blocks of a quarter of a million cells.

    Examples
    --------
    >>> import tempfile
    >>> import sfcpart
    >>> from sfcpart.mesh.shapes import lattice
    >>> mesh = lattice((4, 4)).to_mesh()
    >>> with tempfile.TemporaryDirectory() as place:
    ...     folder = sfcpart.write_split(f"{place}/parts", mesh, sfcpart.split(mesh, 2))
    ...     sfcpart.read_part(folder, 1).n_owned
    8
    """
    from sfcpart.deliver import Delivery, deliver

    return deliver(
        folder,
        mesh,
        partition,
        assessment=assess(mesh, partition) if assessment is None else assessment,
        graph=rows_of_graph(mesh) if isinstance(mesh, MeshSlice) else graph_of(mesh),
        how=Delivery(tuple(formats), layers, across, overwrite, picture, compress, title, report),
        source=None if source is None else Path(source),
        options={} if options is None else options,
    )
