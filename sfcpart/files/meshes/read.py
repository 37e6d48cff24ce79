"""Read a mesh from a file of any format that is known.

The content decides where it is unmistakable (HDF5, VTK, VTU, Gmsh, SU2, ...), the extension
where it is not. Whatever is wrong with a file ends in one line that names it.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from importlib import import_module
from os import PathLike
from pathlib import Path

from sfcpart.errors import FileError, SfcpartError
from sfcpart.files.meshes.assemble import build_mesh
from sfcpart.files.meshes.formats import file_format, told
from sfcpart.files.meshes.raw import RawMesh
from sfcpart.mesh.mesh import Mesh

__all__ = ["read_mesh"]

_OWN: Mapping[str, tuple[str, str]] = {
    "vtkhdf": ("sfcpart.files.meshes.vtkhdf_read", "read_vtkhdf"),
    "vtu": ("sfcpart.files.meshes.vtu_read", "read_vtu"),
    "pvtu": ("sfcpart.files.meshes.vtu_read", "read_pvtu"),
    "vtk": ("sfcpart.files.meshes.vtk_read", "read_vtk"),
    "su2": ("sfcpart.files.meshes.su2_read", "read_su2"),
}


def read_mesh(path: str | PathLike[str]) -> Mesh:
    """Read a mesh from a file.

    Parameters
    ----------
    path : path
        VTKHDF, VTU, legacy VTK, SU2, faces in HDF5 (`sfcpart.files.meshes.faces_file`), or one of
        the formats meshio reads. Content that gives itself away wins over the extension.

    Returns
    -------
    Mesh
        Cells in the file's own order; elements of lower dimension as boundary groups with the
        names and tags of the file; its cell and point fields that hold numbers.

    Raises
    ------
    FileError
        If the file is missing, empty, unreadable, cut short, damaged, of unknown format, or
        of a variant that cannot be read.
    MeshError
        If it has no cells, cells of kinds that cannot be used, coordinates that are not finite
        (which point), or ids out of range.

    Notes
    -----
    Memory: the arrays of the mesh, and once more the arrays of one format (VTKHDF excepted).

    Examples
    --------
    >>> import tempfile
    >>> from sfcpart.files.meshes.faces_file import write_faces
    >>> bar = Mesh.from_faces([[0, 1], [1, -1]], [2.0, 1.0], [[0, 0], [1, 0]], [1.0, 1.0])
    >>> with tempfile.TemporaryDirectory() as folder:
    ...     write_faces(f"{folder}/bar.h5", bar)
    ...     read_mesh(f"{folder}/bar.h5").n_cells
    2
    """
    place = Path(path)
    formats = file_format(place)
    if formats[0] == "faces":
        from sfcpart.files.meshes.faces_file import read_faces

        return read_faces(place)
    return build_mesh(_read_raw(place, formats), str(place))


def _read_raw(place: Path, formats: tuple[str, ...]) -> RawMesh:
    """Call the reader of a format; nothing but our errors comes out."""
    try:
        return _reader(formats)(place)
    except SfcpartError:
        raise
    except OSError as error:
        raise FileError(f"{place}: cannot be read: {told(error)}") from error
    except MemoryError as error:
        raise FileError(
            f"{place}: asks for more memory than there is; it is damaged, or too large"
        ) from error
    except (ValueError, LookupError, TypeError, ArithmeticError) as error:
        # The net under the readers; the tests with damaged files count a fall into it as a fault.
        raise FileError(
            f"{place}: is damaged in a way not foreseen ({type(error).__name__}: {error})"
        ) from error


def _reader(formats: tuple[str, ...]) -> Callable[[Path], RawMesh]:
    """Return the reader of a format; the module it is in is loaded now."""
    module, name = _OWN.get(formats[0], ("", ""))
    if module:
        reader: Callable[[Path], RawMesh] = getattr(import_module(module), name)
        return reader
    from sfcpart.files.meshes.meshio_files import read_with_meshio

    return lambda place: read_with_meshio(place, formats)
