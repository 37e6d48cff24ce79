"""Read a series from an HDF5 file, a PVD file or a folder, frame by frame."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial
from os import PathLike
from pathlib import Path

import numpy as np

from sfcpart.dtypes import Array
from sfcpart.errors import FileError, InputError
from sfcpart.files.hdf5 import is_hdf5
from sfcpart.files.meshes.cell_values import read_cell_values
from sfcpart.files.meshes.formats import EXTENSIONS
from sfcpart.files.meshes.read import read_mesh
from sfcpart.files.series.frame import Frame
from sfcpart.files.series.hdf5_series import frame_names, read_frames
from sfcpart.files.series.pvd import pvd_files
from sfcpart.mesh.mesh import Mesh

__all__ = ["Series", "read_series"]

_VALUES = (".npy", ".txt", ".csv")


@dataclass(frozen=True, eq=False)
class Series:
    """Frames on disk, read one by one each time they are gone through.

    Attributes
    ----------
    path : str
    n_frames : int
    frames : callable
        Begins anew and returns an iterator of `Frame`.
    """

    path: str
    n_frames: int
    frames: Callable[[], Iterator[Frame]]

    def __len__(self) -> int:
        return self.n_frames

    def __iter__(self) -> Iterator[Frame]:
        return self.frames()


def read_series(
    path: str | PathLike[str], *, mesh: Mesh | None = None, parent: str = "parent"
) -> Series:
    """Open a series: weights that change on one mesh, or meshes that follow from each other.

    Parameters
    ----------
    path : path
        An HDF5 file (`sfcpart.files.series.hdf5_series`); a PVD file; or a folder, whose files are
        taken in order of the numbers in their names: meshes, or with `mesh` files of weights
        (.npy, .txt or .csv, one number a cell).
    mesh : Mesh, optional
        The one mesh of a series of weights.
    parent : str
        Cell field of the meshes that holds the parent of each cell (`Frame.parent`). Where there
        is none, cells with the centres of the mesh before are the same, and others come from the
        nearest.

    Returns
    -------
    Series
        Of `Frame`; nothing but names is read yet.

    Raises
    ------
    FileError
        If there is no such series, or it is empty.

    Examples
    --------
    >>> import tempfile
    >>> mesh = Mesh.from_centers([[0.0, 0.0], [1.0, 0.0]])
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     for k, weight in enumerate(([1, 2], [3, 1])):
    ...         np.save(f"{folder}/{k}.npy", weight)
    ...     [frame.weight.tolist() for frame in read_series(folder, mesh=mesh)]
    [[1, 2], [3, 1]]
    """
    place = Path(path)
    if place.is_dir():
        suffixes = _VALUES if mesh is not None else tuple(EXTENSIONS)
        files = sorted((f for f in place.iterdir() if f.suffix.lower() in suffixes), key=_natural)
        if not files:
            kind = "weights (.npy, .txt, .csv)" if mesh is not None else "meshes"
            raise FileError(f"{place}: the folder holds no {kind}; wanted one file a frame")
        if mesh is not None:
            return Series(str(path), len(files), partial(_weights, files, mesh))
        return Series(str(path), len(files), partial(_meshes, files, parent))
    if place.suffix.lower() == ".pvd":
        files = pvd_files(place)
        if not files:
            raise FileError(f"{place}: the series is empty; wanted at least one frame")
        return Series(str(path), len(files), partial(_meshes, files, parent))
    if not place.exists():
        raise FileError(f"{place}: cannot be read: No such file or directory")
    if not is_hdf5(place):
        raise FileError(f"{place}: is no series; wanted an HDF5 file, a PVD file or a folder")
    return Series(str(path), len(frame_names(place)), partial(read_frames, place, mesh=mesh))


def _natural(file: Path) -> list[tuple[int, int | str]]:
    """Order names by the numbers in them: step_9 before step_10."""
    pieces = re.split(r"(\d+)", file.name)
    return [(0, int(piece)) if piece.isdigit() else (1, piece) for piece in pieces]


def _weights(files: list[Path], mesh: Mesh) -> Iterator[Frame]:
    """Yield one mesh with the weights of each file."""
    for file in files:
        yield Frame(mesh, weight=read_cell_values(file, mesh.n_cells))


def _meshes(files: list[Path], parent: str) -> Iterator[Frame]:
    """Yield the mesh of each file, with its parents or as the cells of the one before."""
    before: Mesh | None = None
    for file in files:
        mesh = read_mesh(file)
        origin = _parents(mesh, parent, file)
        if before is not None and origin is None:
            mesh = _same_cells(before, mesh)
        try:
            yield Frame(mesh, parent=None if before is None else origin)
        except InputError as error:
            raise InputError(f"{file}: {error}") from error
        before = mesh


def _parents(mesh: Mesh, name: str, file: Path) -> Array | None:
    """Return the field of parents as whole numbers, None if there is none."""
    if name not in mesh.cell_fields:
        return None
    values = np.asarray(mesh.cell_fields[name])
    whole = values.astype(np.int64)
    if not np.array_equal(whole, values):
        raise InputError(f"{file}: cell field {name!r} holds fractions; parents are whole numbers")
    return whole


def _same_cells(before: Mesh, mesh: Mesh) -> Mesh:
    """Return a mesh, or if its cells are those before, that one with the new fields.

    What was derived from the mesh before is then kept.
    """
    if not np.array_equal(before.centers, mesh.centers):
        return mesh
    for name, values in mesh.cell_fields.items():
        before = before.with_cell_field(name, values)
    return before
