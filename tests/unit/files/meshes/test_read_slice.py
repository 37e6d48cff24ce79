"""Reading by slices gives, on any number of ranks, the slices of the mesh that one rank reads."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.comm import run_ranks
from sfcpart.errors import FileError, MeshError
from sfcpart.files.hdf5 import create_hdf5
from sfcpart.files.meshes.faces_file import write_faces
from sfcpart.files.meshes.read import read_mesh
from sfcpart.files.meshes.read_slice import is_read_by_slices, read_slice
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.refined import refined_box
from sfcpart.slices.mesh_slice import MeshSlice, cut_mesh

SIZES = (1, 2, 3, 7, 20)
CUBE = np.array([[x, y, z] for z in (0, 1) for y in (0, 1) for x in (0, 1)], float)
CUBE_FACES = ((0, 2, 3, 1), (4, 5, 7, 6), (0, 1, 5, 4), (2, 6, 7, 3), (0, 4, 6, 2), (1, 3, 7, 5))


def write_grid(path, arrays):
    with create_hdf5(path) as file:
        group = file.create_group("VTKHDF")
        group.attrs["Version"] = [2, 2]
        group.attrs.create("Type", np.bytes_("UnstructuredGrid"))
        for name, values in arrays.items():
            group.create_dataset(name, data=np.asarray(values))
    return path


def chain(n: int, *, shift: float = 0.0) -> np.ndarray:
    """Return the points of a row of n cubes, four for each wall."""
    wall = np.array([[0, 0, 0], [0, 1, 0], [0, 1, 1], [0, 0, 1]], float)
    return np.concatenate([wall + np.array([k + shift, 0, 0]) for k in range(n + 1)])


def cubes_of_chain(n: int) -> list[list[int]]:
    return [[*range(4 * k, 4 * k + 4), *range(4 * k + 4, 4 * k + 8)] for k in range(n)]


def ghosted(path, *, joined: bool = True):
    """Two partitions of a row of six cubes with a ghost each, walls tagged, a loose line."""
    left, right = cubes_of_chain(4), cubes_of_chain(4)
    quads, line = [[0, 1, 2, 3]], [[0, 1]]
    arrays = {
        "NumberOfPoints": [21, 20],
        "NumberOfCells": [6, 5],
        "NumberOfConnectivityIds": [38, 36],
        "Points": np.concatenate([chain(4), [[50, 0, 0]], chain(4, shift=2)]),
        "Connectivity": [i for row in (*left, *quads, *line, *quads, *right) for i in row],
        "Offsets": [0, 8, 16, 24, 32, 36, 38, 0, 4, 12, 20, 28, 36],
        "Types": np.array([12] * 4 + [9, 3] + [9] + [12] * 4, np.uint8),
        "CellData/vtkGhostType": np.array([0, 0, 0, 1, 0, 0, 0, 1, 0, 0, 0], np.uint8),
        "CellData/cell_tags": np.array([7, 7, 7, 7, 1, 2, 3, 7, 7, 7, 7]),
        "CellData/column": np.arange(11.0)[:, None],
        "CellData/vector": np.arange(33, dtype=">f4").reshape(11, 3),
        "PointData/height": np.concatenate([chain(4)[:, 2], [0.5], chain(4)[:, 2]]),
    }
    if joined:
        gid = [*range(100, 120), 90, *range(108, 128)]
        arrays["PointData/GlobalPointIds"] = np.array(gid)
    return write_grid(path, arrays)


def polyhedral(path):
    """Two partitions: a cube as a polyhedron and a hexahedron; then two polyhedra."""
    faces = np.array(CUBE_FACES)
    corners = CUBE[:, [2, 1, 0]]
    arrays = {
        "NumberOfPoints": [8, 16],
        "NumberOfCells": [2, 2],
        "NumberOfConnectivityIds": [16, 16],
        "Points": np.concatenate([corners, corners + 1, corners + 5]),
        "Connectivity": [*range(8), 0, 1, 3, 2, 4, 5, 7, 6, *range(16)],
        "Offsets": [0, 8, 16, 0, 8, 16],
        "Types": np.array([42, 12, 42, 42], np.uint8),
        "NumberOfFaces": [6, 12],
        "NumberOfFaceConnectivityIds": [24, 48],
        "NumberOfPolyhedronToFaceIds": [6, 12],
        "FaceConnectivity": np.concatenate([faces, faces, faces + 8]).reshape(-1),
        "FaceOffsets": [*range(0, 25, 4), *range(0, 49, 4)],
        "PolyhedronToFaces": [*range(6), *range(11, -1, -1)],
        "PolyhedronOffsets": [0, 6, 6, 0, 6, 12],
    }
    return write_grid(path, arrays)


def flat(path):
    """Four triangles in the plane, the rest of the points not in it: then it is no plane."""
    return write_grid(
        path,
        {
            "NumberOfPoints": [6],
            "NumberOfCells": [4],
            "NumberOfConnectivityIds": [12],
            "Points": [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0], [0.5, 0.5, 0], [9, 9, 9]],
            "Connectivity": [0, 1, 4, 1, 2, 4, 2, 3, 4, 3, 0, 4],
            "Offsets": [0, 3, 6, 9, 12],
            "Types": np.full(4, 5, np.uint8),
        },
    )


def faces(path):
    write_faces(path, refined_box(4, n_levels=1).to_mesh())
    return path


WRITERS = {
    "ghosted": ghosted,
    "cracked": lambda path: ghosted(path, joined=False),
    "polyhedral": polyhedral,
    "flat": flat,
    "faces": faces,
}


def assert_same(held: MeshSlice, wanted: MeshSlice) -> None:
    one, other = held.mesh, wanted.mesh
    assert (held.first_gid, held.n_points) == (wanted.first_gid, wanted.n_points)
    assert (one.dim, one.space_dim) == (other.dim, other.space_dim)
    for name in ("kind", "indptr", "indices", "points", "given_center", "given_measure"):
        assert_equal(getattr(one, name), getattr(other, name))
    for name in ("polyhedra", "faces"):
        pair = [getattr(mesh, name) for mesh in (one, other)]
        assert_equal(*(None if part is None else list(vars(part).values()) for part in pair))
    assert_equal(held.point_gid, wanted.point_gid)
    assert_equal(dict(one.cell_fields), dict(other.cell_fields))
    assert_equal(dict(one.point_fields), dict(other.point_fields))
    assert_equal([vars(group) for group in one.boundary], [vars(g) for g in other.boundary])
    assert_equal([vars(rows) for rows in held.groups], [vars(rows) for rows in wanted.groups])


def assert_equal(one, other) -> None:
    """Compare arrays, values, and lists and mappings of them."""
    if isinstance(one, dict):
        assert list(one) == list(other)
        assert_equal(list(one.values()), list(other.values()))
    elif isinstance(one, list):
        assert len(one) == len(other)
        for a, b in zip(one, other, strict=True):
            assert_equal(a, b)
    elif isinstance(one, np.ndarray):
        assert one.dtype.kind == other.dtype.kind
        np.testing.assert_array_equal(one, other)
    else:
        assert one == other


@pytest.mark.parametrize("size", SIZES)
@pytest.mark.parametrize("name", WRITERS)
def test_slices_are_those_of_the_mesh_one_rank_reads(name, size, tmp_path) -> None:
    path = WRITERS[name](tmp_path / ("a.h5" if name == "faces" else "a.vtkhdf"))
    mesh = read_mesh(path)

    def read(comm):
        held = read_slice(path, comm=comm)
        assert_same(held, cut_mesh(mesh, comm, rank_first=held.rank_first))
        return held.n_local

    assert sum(run_ranks(size, read)) == mesh.n_cells


def test_other_formats_are_spread_from_rank_0(tmp_path) -> None:
    import meshio

    path = tmp_path / "a.vtk"
    tets = [[0, 1, 2, 4], [1, 3, 2, 7]]
    meshio.Mesh(CUBE, [("tetra", np.array(tets)), ("triangle", [[0, 1, 2]])]).write(path)
    mesh = read_mesh(path)
    assert not is_read_by_slices(path)
    run_ranks(3, lambda comm: assert_same(read_slice(path, comm=comm), cut_mesh(mesh, comm)))


def test_a_missing_file_fails_alike_on_all_ranks(tmp_path) -> None:
    with pytest.raises(FileError, match="No such file"):
        run_ranks(3, lambda comm: read_slice(tmp_path / "none.vtkhdf", comm=comm))


def write_bad(path, **changes):
    arrays = {
        "NumberOfPoints": [20],
        "NumberOfCells": [4],
        "NumberOfConnectivityIds": [32],
        "Points": chain(4),
        "Connectivity": [i for row in cubes_of_chain(4) for i in row],
        "Offsets": [0, 8, 16, 24, 32],
        "Types": np.full(4, 12, np.uint8),
    }
    return write_grid(path, arrays | changes)


def spoiled(name: str, at: int, value: float):
    """Return a change of one number of a good file."""
    good = {
        "Points": chain(4),
        "Connectivity": np.array(cubes_of_chain(4)).reshape(-1),
        "Offsets": np.arange(0, 33, 8),
    }[name].copy()
    good.reshape(-1)[at] = value
    return {name: good}


BAD = {
    "coordinate": (spoiled("Points", 58, np.nan), "point 19 has coordinates"),
    "id": (spoiled("Connectivity", 31, 20), "entry 31 of VTKHDF/Connectivity in partition 0 is 20"),
    "falling": (spoiled("Offsets", 3, 5), "falls somewhere"),
    "total": (spoiled("Offsets", 4, 30), "wanted 0 to 32"),
    "short": ({"Points": chain(3)}, "Points has 16 rows"),
    "kind": ({"Types": np.array([12, 12, 12, 10], np.uint8)}, r"cell 3 \(tetra\) has 8 points"),
    "lines": ({"Types": np.array([3] * 4, np.uint8)}, "no cells of dimension 2 or 3"),
    "columns": ({"Points": chain(4)[:, :1]}, "point coordinates have shape"),
    "none": (
        {
            "NumberOfCells": [0],
            "NumberOfConnectivityIds": [0],
            "Types": np.empty(0, np.uint8),
            "Offsets": [0],
        },
        "holds no cells",
    ),
}


@pytest.mark.parametrize("name", BAD)
def test_what_is_wrong_on_one_rank_is_raised_on_all(name, tmp_path) -> None:
    changes, text = BAD[name]
    path = write_bad(tmp_path / "a.vtkhdf", **changes)
    with pytest.raises((FileError, MeshError), match=text):
        run_ranks(3, lambda comm: read_slice(path, comm=comm))


def test_points_with_one_id_must_lie_together(tmp_path) -> None:
    arrays = {
        "NumberOfPoints": [4, 4],
        "NumberOfCells": [1, 1],
        "NumberOfConnectivityIds": [4, 4],
        "Points": np.concatenate([CUBE[:4], CUBE[1:5]]),
        "Connectivity": [*range(4), *range(4)],
        "Offsets": [0, 4, 0, 4],
        "Types": np.full(2, 9, np.uint8),
        "PointData/GlobalPointIds": [0, 1, 2, 3, 1, 2, 3, 3],
    }
    path = write_grid(tmp_path / "a.vtkhdf", arrays)
    with pytest.raises(MeshError, match="point 7 and point 3 share global id 3"):
        run_ranks(3, lambda comm: read_slice(path, comm=comm))


def test_polyhedra_with_too_few_faces_are_refused(tmp_path) -> None:
    arrays = {
        "NumberOfPoints": [8],
        "NumberOfCells": [1],
        "NumberOfConnectivityIds": [8],
        "Points": CUBE,
        "Connectivity": range(8),
        "Offsets": [0, 8],
        "Types": np.array([42], np.uint8),
        "NumberOfFaces": [1],
        "NumberOfFaceConnectivityIds": [4],
        "NumberOfPolyhedronToFaceIds": [1],
        "FaceConnectivity": range(4),
        "FaceOffsets": [0, 4],
        "PolyhedronToFaces": [0],
        "PolyhedronOffsets": [0, 1],
    }
    path = write_grid(tmp_path / "a.vtkhdf", arrays)
    with pytest.raises(MeshError, match="has 1 faces; wanted at least 4"):
        run_ranks(2, lambda comm: read_slice(path, comm=comm))


def test_files_of_faces_are_checked(tmp_path) -> None:
    path = tmp_path / "a.h5"
    write_faces(path, Mesh.from_faces([[0, 1]], [1.0], [[0, 0], [1, 0]], [1.0, 1.0]))
    with create_hdf5(tmp_path / "b.h5") as file:
        group = file.create_group("faces_mesh")
        group.attrs["layout"] = 2
    with pytest.raises(FileError, match="has layout 2"):
        run_ranks(2, lambda comm: read_slice(tmp_path / "b.h5", comm=comm))


def test_one_process_reads_everything(tmp_path) -> None:
    held = read_slice(faces(tmp_path / "a.h5"))
    assert (held.comm.size, held.n_local) == (1, held.n_cells)
