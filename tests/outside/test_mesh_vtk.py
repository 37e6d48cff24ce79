"""Measures, faces and neighbours against VTK, an independent reference library (vtk on PyPI)."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.graph import cell_graph
from sfcpart.mesh.kinds import KINDS
from sfcpart.mesh.mesh import Mesh
from tests.oracles.faces import cell_faces
from tests.strategies import DEGENERATE, grid
from tests.unit.mesh.test_geometry import REGULAR, prism
from tests.unit.test_graph import as_polyhedra

vtk = pytest.importorskip("vtk")
from vtk.util.numpy_support import numpy_to_vtk, vtk_to_numpy  # noqa: E402


def to_vtk(mesh):
    """Hand a mesh to VTK cell by cell."""
    grid_ = vtk.vtkUnstructuredGrid()
    points = vtk.vtkPoints()
    xyz = np.zeros((mesh.n_points, 3))
    xyz[:, : mesh.points.shape[1]] = mesh.points
    points.SetData(numpy_to_vtk(xyz, deep=True))
    grid_.SetPoints(points)
    faces = cell_faces(mesh)
    for c, kind in enumerate(mesh.kind.tolist()):
        ids = vtk.vtkIdList()
        if kind == 42:
            ids.InsertNextId(len(faces[c]))
            for face in faces[c]:
                ids.InsertNextId(len(face))
                for point in face:
                    ids.InsertNextId(point)
        else:
            for point in mesh.indices[mesh.indptr[c] : mesh.indptr[c + 1]].tolist():
                ids.InsertNextId(point)
        grid_.InsertNextCell(kind, ids)
    return grid_


def vtk_sizes(mesh):
    """Let vtkCellSizeFilter measure the cells; its wedges come out negative in VTK's own order."""
    sizes = vtk.vtkCellSizeFilter()
    sizes.SetInputData(to_vtk(mesh))
    sizes.Update()
    name = "Volume" if mesh.dim == 3 else "Area"
    return np.abs(vtk_to_numpy(sizes.GetOutput().GetCellData().GetArray(name)))


def vtk_neighbours(mesh):
    """Ask VTK, face by face, for the cells that use all its points."""
    data, shared = to_vtk(mesh), set()
    found = vtk.vtkIdList()
    for c in range(mesh.n_cells):
        cell = data.GetCell(c)
        many = cell.GetNumberOfFaces() if mesh.dim == 3 else cell.GetNumberOfEdges()
        for f in range(many):
            face = cell.GetFace(f) if mesh.dim == 3 else cell.GetEdge(f)
            corners = vtk.vtkIdList()
            for i in range(face.GetNumberOfPoints()):
                corners.InsertNextId(face.GetPointId(i))
            data.GetCellNeighbors(c, corners, found)
            shared |= {(c, found.GetId(i)) for i in range(found.GetNumberOfIds())}
    return shared


def graph_pairs(mesh):
    graph = cell_graph(mesh)
    row = np.repeat(np.arange(mesh.n_cells), np.diff(graph.indptr))
    return set(zip(row.tolist(), graph.indices.tolist(), strict=True))


@pytest.mark.parametrize("name", sorted(REGULAR))
def test_solids_sheared_but_with_plane_faces_have_vtk_volumes(name):
    shear = np.array([(1.0, 0.3, -0.2), (0.1, 0.9, 0.4), (0.0, 0.2, 1.3)])
    points = np.array(REGULAR[name], float) @ shear.T
    if name == "voxel":  # VTK takes voxels to be boxes
        points = np.array(REGULAR[name], float) * (2, 3, 5)
    mesh = Mesh.from_arrays(points, {name: [np.arange(len(points))]})
    assert mesh.measures == pytest.approx(vtk_sizes(mesh), rel=1e-12)


@pytest.mark.parametrize(("name", "n"), [("penta_prism", 5), ("hexa_prism", 6)])
def test_prisms_have_vtk_volumes(name, n):
    mesh = Mesh.from_arrays(prism(n), {name: [np.arange(2 * n)]})
    assert mesh.measures == pytest.approx(vtk_sizes(mesh), rel=1e-12)


@pytest.mark.parametrize("code", [code for code, kind in KINDS.items() if kind.n_nodes > 0])
def test_corners_and_faces_of_each_kind_are_vtk_s(code):
    kind = KINDS[code]
    cell = vtk.vtkGenericCell.InstantiateCell(code)
    assert cell.GetCellDimension() == kind.dim
    assert cell.GetNumberOfPoints() == kind.n_nodes
    if kind.dim < 2:
        return
    for i in range(kind.n_nodes):
        cell.GetPointIds().SetId(i, i)
    many = cell.GetNumberOfFaces() if kind.dim == 3 else cell.GetNumberOfEdges()
    got = set()
    for f in range(many):
        face = cell.GetFace(f) if kind.dim == 3 else cell.GetEdge(f)
        ids = {face.GetPointId(i) for i in range(face.GetNumberOfPoints())}
        got.add(frozenset(i for i in ids if i < kind.n_corners))
    assert got == {frozenset(face) for face in kind.faces}


@pytest.mark.parametrize(
    "mesh",
    [
        grid((3, 2, 4)),
        grid((3, 2, 2), simplices=True),
        grid((5, 4)),
        grid((5, 4), simplices=True),
        as_polyhedra(grid((3, 2, 2))),
        DEGENERATE["mixed_space"]().mesh,
        DEGENERATE["mixed_plane"]().mesh,
        DEGENERATE["non_manifold"]().mesh,
        DEGENERATE["flat_in_space"]().mesh,
    ],
    ids=["hexes", "tets", "quads", "triangles", "polyhedra", "mixed", "plane", "fins", "flat"],
)
def test_neighbours_and_sizes_are_vtk_s(mesh):
    assert graph_pairs(mesh) == vtk_neighbours(mesh)
    assert mesh.measures == pytest.approx(vtk_sizes(mesh), rel=1e-9)


def test_the_outer_surface_has_as_many_faces_and_as_much_area_as_vtk_s():
    mesh = grid((4, 3, 2), simplices=True)
    surface = vtk.vtkDataSetSurfaceFilter()
    surface.SetInputData(to_vtk(mesh))
    surface.Update()
    sizes = vtk.vtkCellSizeFilter()
    sizes.SetInputData(surface.GetOutput())
    sizes.Update()
    area = vtk_to_numpy(sizes.GetOutput().GetCellData().GetArray("Area"))
    graph = cell_graph(mesh)
    assert graph.boundary_count.sum() == len(area)
    assert graph.boundary_measure.sum() == pytest.approx(area.sum(), rel=1e-12)
