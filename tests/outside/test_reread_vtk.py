"""Every output, read again by the `vtk` package (Kitware's readers and filters, from PyPI).

Checked against the unsplit mesh: owned cells are counted once, volumes are conserved cell by
cell, the outer surface has as many faces as before the split (ghost cells work), global ids
lead back to the mesh.
"""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from sfcpart.files.parts.vtkhdf_write import write_vtkhdf
from sfcpart.files.parts.vtu import write_vtu_pieces
from sfcpart.graph import cell_graph
from sfcpart.halo import build_halo
from sfcpart.mesh.mesh import Mesh
from sfcpart.partition import Partition
from tests.parted import Parted, parted

vtk = pytest.importorskip("vtk", reason="the vtk package is not installed")
to_numpy = pytest.importorskip("vtk.util.numpy_support").vtk_to_numpy

SOLID = ["tets", "mixed", "polyhedra", "hybrid"]
SHEETS = ["section", "shell"]
BARE = ["faces", "centers"]


def from_vtkhdf(case: Parted, folder: Path, **options) -> list:
    """Write one VTKHDF file and return its partitions as vtk reads them."""
    path = folder / "parts.vtkhdf"
    write_vtkhdf(path, case.mesh, partition=case.partition, halo=case.halo, **options)
    reader = vtk.vtkHDFReader()
    reader.SetFileName(str(path))
    reader.Update()
    found = reader.GetOutputDataObject(0)
    return [found.GetPartition(k) for k in range(found.GetNumberOfPartitions())]


def packed(case: Parted, folder: Path) -> list:
    """Write with compression."""
    return from_vtkhdf(case, folder, compress=True)


def from_pieces(case: Parted, folder: Path) -> list:
    """Write VTU pieces and return each as vtk reads it."""
    write_vtu_pieces(folder, case.mesh, partition=case.partition, halo=case.halo)
    grids = []
    for part in range(case.partition.n_parts):
        reader = vtk.vtkXMLUnstructuredGridReader()
        reader.SetFileName(str(folder / "pieces" / f"part_{part:04d}.vtu"))
        reader.Update()
        grids.append(reader.GetOutput())
    return grids


def from_joint(case: Parted, folder: Path) -> list:
    """Write VTU pieces and return the parts as vtk reads them through the PVTU."""
    write_vtu_pieces(folder, case.mesh, partition=case.partition, halo=case.halo)
    reader = vtk.vtkXMLPUnstructuredGridReader()
    reader.SetFileName(str(folder / "parts.pvtu"))
    reader.UpdateInformation()
    grids = []
    for part in range(case.partition.n_parts):
        reader.UpdatePiece(part, case.partition.n_parts, 0)
        grid = vtk.vtkUnstructuredGrid()
        grid.DeepCopy(reader.GetOutput())
        grids.append(grid)
    return grids


WAYS: dict[str, Callable[[Parted, Path], list]] = {
    "vtkhdf": from_vtkhdf,
    "packed": packed,
    "pieces": from_pieces,
    "joint": from_joint,
}
pytestmark = pytest.mark.parametrize("way", WAYS)


def cell_array(grid, name: str) -> np.ndarray:
    return to_numpy(grid.GetCellData().GetArray(name))


def owned(grid) -> np.ndarray:
    return cell_array(grid, "vtkGhostType") == 0


def unsplit_grid(mesh: Mesh):
    """Make vtk's grid of a mesh without polyhedra, by vtk's own calls."""
    grid, points = vtk.vtkUnstructuredGrid(), vtk.vtkPoints()
    points.SetDataTypeToDouble()
    for point in mesh.points:
        points.InsertNextPoint(*point, *([0.0] * (3 - len(point))))
    grid.SetPoints(points)
    for cell, kind in enumerate(mesh.kind):
        ids = mesh.indices[mesh.indptr[cell] : mesh.indptr[cell + 1]]
        grid.InsertNextCell(int(kind), len(ids), [int(i) for i in ids])
    return grid


def surface_faces(grid) -> int:
    """Count the faces of a grid's outer surface as vtk sees it, ghost cells taken away."""
    surface = vtk.vtkGeometryFilter()
    surface.SetInputData(grid)
    surface.Update()
    return surface.GetOutput().GetNumberOfCells()


def sizes(grid) -> np.ndarray:
    """Return vtk's area or volume of each cell."""
    measure = vtk.vtkCellSizeFilter()
    measure.SetInputData(grid)
    measure.Update()
    area, volume = (cell_array(measure.GetOutput(), name) for name in ("Area", "Volume"))
    return np.abs(area) + np.abs(volume)


@pytest.mark.parametrize("name", [*SOLID, *SHEETS, *BARE])
def test_owned_cells_are_counted_once(way, name, tmp_path):
    n_parts = 2 if name == "hybrid" else 4
    case = parted(name, n_parts=n_parts)
    grids = WAYS[way](case, tmp_path)
    assert len(grids) == n_parts
    ids = [cell_array(grid, "GlobalCellIds") for grid in grids]
    mine = np.concatenate([gid[owned(grid)] for gid, grid in zip(ids, grids, strict=True)])
    assert sorted(mine.tolist()) == list(range(case.mesh.n_cells))
    for part, (grid, gid) in enumerate(zip(grids, ids, strict=True)):
        assert np.array_equal(cell_array(grid, "part"), case.partition.cell_part[gid])
        assert np.array_equal(cell_array(grid, "depth"), case.mesh.cell_fields["depth"][gid])
        assert np.array_equal(cell_array(grid, "part") == part, owned(grid))
        assert grid.GetCellData().GetGlobalIds().GetName() == "GlobalCellIds"
        assert grid.GetPointData().GetGlobalIds().GetName() == "GlobalPointIds"


@pytest.mark.parametrize("name", [*SOLID, *SHEETS])
def test_points_and_kinds_lead_back_to_the_mesh(way, name, tmp_path):
    case = parted(name, n_parts=2)
    for grid in WAYS[way](case, tmp_path):
        point_gid = to_numpy(grid.GetPointData().GetGlobalIds())
        dim = case.mesh.points.shape[1]
        assert np.array_equal(
            to_numpy(grid.GetPoints().GetData())[:, :dim], case.mesh.points[point_gid]
        )
        for cell, gid in enumerate(cell_array(grid, "GlobalCellIds")):
            assert grid.GetCellType(cell) == case.mesh.kind[gid]
            ids = grid.GetCell(cell).GetPointIds()
            found = {int(point_gid[ids.GetId(i)]) for i in range(ids.GetNumberOfIds())}
            wanted = case.mesh.indices[case.mesh.indptr[gid] : case.mesh.indptr[gid + 1]]
            assert found == set(wanted.tolist())


@pytest.mark.parametrize("name", [*SOLID, *SHEETS])
def test_volume_is_conserved_cell_by_cell(way, name, tmp_path):
    case = parted(name, n_parts=2, across="points")
    total = 0.0
    for grid in WAYS[way](case, tmp_path):
        size = sizes(grid)
        gid = cell_array(grid, "GlobalCellIds")
        total += size[owned(grid)].sum()
        if name in ("tets", "polyhedra", "hybrid"):  # planar faces: one volume by any definition
            assert np.allclose(size, case.mesh.measures[gid], rtol=1e-9)
    assert np.isclose(total, case.mesh.measures.sum(), rtol=1e-6)


@pytest.mark.parametrize("layers", [1, 2])
@pytest.mark.parametrize("name", ["tets", "mixed"])
def test_outer_surface_is_that_of_the_unsplit_mesh(way, name, layers, tmp_path):
    case = parted(name, n_parts=4, layers=layers)
    assert len(case.halo.halo) > 0
    found = sum(surface_faces(grid) for grid in WAYS[way](case, tmp_path))
    assert found == surface_faces(unsplit_grid(case.mesh))
    assert found == cell_graph(case.mesh).boundary_count.sum()


def test_outer_surface_of_polyhedra(way, tmp_path):
    case = parted("polyhedra", n_parts=3)
    found = sum(surface_faces(grid) for grid in WAYS[way](case, tmp_path))
    assert found == cell_graph(case.mesh).boundary_count.sum()


def test_without_ghosts_the_cuts_would_be_walls(way, tmp_path):
    case = parted("tets", n_parts=4)
    bare = build_halo(case.mesh, None, case.partition, order=np.arange(case.mesh.n_cells), layers=0)
    grids = WAYS[way](Parted(case.mesh, case.partition, bare), tmp_path)
    cut = len(case.halo.halo)
    found = sum(surface_faces(grid) for grid in grids)
    assert found > cell_graph(case.mesh).boundary_count.sum() + cut // 2


def test_an_empty_part(way, tmp_path):
    case = parted("tets", n_parts=3)
    partition = Partition.from_array(case.partition.cell_part * 2, 6)  # parts 1, 3, 5 are empty
    order = np.arange(case.mesh.n_cells)
    halo = build_halo(case.mesh, cell_graph(case.mesh), partition, order=order)
    grids = WAYS[way](Parted(case.mesh, partition, halo), tmp_path)
    counts = [grid.GetNumberOfCells() if grid is not None else 0 for grid in grids]
    assert len(counts) == 6
    assert [count == 0 for count in counts] == [False, True] * 3
    size = sum(sizes(grid)[owned(grid)].sum() for grid in grids[::2])
    assert np.isclose(size, case.mesh.measures.sum(), rtol=1e-9)
