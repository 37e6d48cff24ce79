"""Small meshes of every kind, and files of them made by other libraries (vtk, meshio)."""

from __future__ import annotations

from pathlib import Path

import meshio
import numpy as np

CUBE_FACES = ((0, 1, 2, 3), (4, 5, 6, 7), (0, 1, 5, 4), (1, 2, 6, 5), (2, 3, 7, 6), (3, 0, 4, 7))
# VTK code and points of each element, kinds interleaved on purpose.
MIXED = (
    (10, (0, 1, 2, 3)),
    (12, tuple(range(8))),
    (11, tuple(range(2, 10))),
    (24, tuple(range(10))),
    (9, (0, 1, 2, 3)),
    (3, (0, 1)),
    (14, tuple(range(5))),
    (10, (5, 6, 7, 8)),
)
POLYHEDRA = ((42, tuple(range(8))), (10, (1, 2, 3, 4)), (42, tuple(range(8))))
N_POINTS = 20


def points() -> np.ndarray:
    return np.random.default_rng(3).random((N_POINTS, 3))


def vtk_grid(elements=MIXED + POLYHEDRA):
    """Build an unstructured grid of vtk with fields `id`, `v` and a field of texts."""
    import vtk
    from vtk.util.numpy_support import numpy_to_vtk

    grid, places = vtk.vtkUnstructuredGrid(), vtk.vtkPoints()
    places.SetData(numpy_to_vtk(points(), deep=1))
    grid.SetPoints(places)
    for code, ids in elements:
        if code == 42:
            stream = vtk.vtkIdList()
            for number in (6, *(n for face in CUBE_FACES for n in (4, *face))):
                stream.InsertNextId(number)
            grid.InsertNextCell(42, stream)
        else:
            grid.InsertNextCell(code, len(ids), ids)
    fields = (
        (grid.GetCellData(), "id", np.arange(len(elements), dtype=np.int32)),
        (grid.GetPointData(), "v", np.arange(3.0 * N_POINTS).reshape(-1, 3)),
    )
    for data, name, values in fields:
        array = numpy_to_vtk(values, deep=1)
        array.SetName(name)
        data.AddArray(array)
    texts = vtk.vtkStringArray()
    texts.SetName("texts")
    for i in range(len(elements)):
        texts.InsertNextValue("rock" * i)
    grid.GetCellData().AddArray(texts)
    return grid


def assert_is_sample(mesh, elements=MIXED + POLYHEDRA) -> None:
    """Check that a mesh read from a file holds the sample in file order."""
    rows = [(i, code, ids) for i, (code, ids) in enumerate(elements) if code not in (3, 9)]
    assert mesh.kind.tolist() == [code for _, code, _ in rows]
    assert mesh.cell_fields["id"].tolist() == [i for i, _, _ in rows]
    for row, (_, _, ids) in enumerate(rows):
        found = mesh.indices[mesh.indptr[row] : mesh.indptr[row + 1]].tolist()
        assert found == list(ids)
    assert {group.name: group.indices.tolist() for group in mesh.boundary} == {
        "lines": [0, 1],
        "surfaces": [0, 1, 2, 3],
    }
    assert mesh.points.shape == (N_POINTS, 3)
    np.testing.assert_allclose(mesh.point_fields["v"][:, 1], np.arange(N_POINTS) * 3.0 + 1)
    assert "texts" not in mesh.cell_fields
    if any(code == 42 for code, _ in elements):
        faces = mesh.polyhedra
        per_cell = np.diff(faces.cell_indptr)
        assert per_cell.tolist() == [6 if code == 42 else 0 for _, code, _ in rows]
        first = faces.cell_indices[faces.cell_indptr[:-1][per_cell > 0][-1]]
        at = slice(faces.face_indptr[first], faces.face_indptr[first + 1])
        assert sorted(faces.face_indices[at].tolist()) in [sorted(f) for f in CUBE_FACES]


def tet_block() -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Return points, tets and outer triangles of a cube cut into six tets."""
    corners = np.array([[x, y, z] for z in (0, 1) for y in (0, 1) for x in (0, 1)], float)
    paths = ((1, 3), (3, 2), (2, 6), (6, 4), (4, 5), (5, 1))
    tets = np.array([(0, a, b, 7) for a, b in paths])
    triangles = np.array([(0, 1, 3), (0, 3, 2), (4, 7, 5), (4, 6, 7)])
    return corners, tets, triangles


def write_tets(path: Path, file_format: str, **options) -> None:
    """Write six tets and four triangles through meshio, with a field and tags where it can."""
    corners, tets, triangles = tet_block()
    data = {"work": [np.arange(6.0), np.zeros(4)]}
    if file_format in ("medit", "ugrid", "gmsh22"):
        name = {"medit": "medit:ref", "ugrid": "ugrid:ref", "gmsh22": "gmsh:physical"}[file_format]
        data = {name: [np.full(6, 9), np.array([1, 1, 2, 2])]}
    if file_format == "gmsh22":
        data["gmsh:geometrical"] = data["gmsh:physical"]
    mesh = meshio.Mesh(corners, [("tetra", tets), ("triangle", triangles)], cell_data=data)
    if file_format == "gmsh22":
        mesh.field_data = {"bed": np.array([1, 2]), "water": np.array([9, 3])}
    mesh.write(path, file_format=file_format, **options)


def write_ugrid(path: Path) -> None:
    """Write the six tets and four triangles as big-endian UGRID by hand (meshio's writer fails)."""
    corners, tets, triangles = tet_block()
    with path.open("wb") as file:
        for block in ([8, 4, 0, 6, 0, 0, 0], corners, triangles + 1, [1, 1, 2, 2], tets + 1):
            array = np.asarray(block)
            file.write(array.astype(">f8" if array.dtype.kind == "f" else ">i4").tobytes())


def write_shell(path: Path, file_format: str) -> None:
    """Write a tetrahedron's surface through meshio, for formats that hold triangles only."""
    corners = np.array([[0, 0, 0], [1, 0, 0], [0, 1, 0], [0, 0, 1]], float)
    faces = np.array([[0, 2, 1], [0, 1, 3], [1, 2, 3], [0, 3, 2]])
    meshio.Mesh(corners, [("triangle", faces)]).write(path, file_format=file_format)


SU2 = """% the Skerry Channel, a corner of it
NDIME= 2
NELEM= 4
5 0 1 4 0
9 1 2 5 4 1
5 0 4 3 2
5 4 5 3 3
NPOIN= 6
0.0 0.0 0
1.0 0.0 1
2.0 0.0 2
0.0 1.5 3
1.0 1.0 4
2.0 1.25 5
NMARK= 2
MARKER_TAG= rock bed
MARKER_ELEMS= 2
3 0 1
3 1 2
MARKER_TAG= 7
MARKER_ELEMS= 1
3 2 5
"""
