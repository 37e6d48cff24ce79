"""VTU pieces and their PVTU, read back by meshio."""

from __future__ import annotations

from xml.etree import ElementTree

import h5py
import meshio
import numpy as np
import pytest

from sfcpart.errors import FileError, PartitionError
from sfcpart.files.parts.vtu import write_vtu_pieces
from tests.parted import Parted, parted


def write(folder, case: Parted) -> None:
    write_vtu_pieces(folder, case.mesh, partition=case.partition, halo=case.halo)


def _in_vtk_order(block):
    """Return the points of cells in VTK's order; meshio turns the triangles of wedges around."""
    return block.data[:, [0, 2, 1, 3, 5, 4]] if block.type == "wedge" else block.data


@pytest.mark.parametrize("name", ["tets", "mixed", "section", "shell", "centers"])
def test_meshio_reads_the_pieces(tmp_path, name):
    case = parted(name, n_parts=3)
    write(tmp_path, case)
    for part in range(3):
        piece = meshio.read(tmp_path / "pieces" / f"part_{part:04d}.vtu")
        gid = np.concatenate(piece.cell_data["GlobalCellIds"])
        owned, foreign = case.halo.owned_cells(part), case.halo.halo_cells(part)
        assert gid.tolist() == [*owned, *foreign]
        ghost = np.concatenate(piece.cell_data["vtkGhostType"])
        assert ghost.tolist() == [0] * len(owned) + [1] * len(foreign)
        assert np.array_equal(
            np.concatenate(piece.cell_data["flow"]), case.mesh.cell_fields["flow"][gid]
        )
        point_gid = piece.point_data["GlobalPointIds"]
        if case.mesh.points is not None:
            dim = case.mesh.points.shape[1]
            assert np.array_equal(piece.points[:, :dim], case.mesh.points[point_gid])
            flat = np.concatenate([_in_vtk_order(block).ravel() for block in piece.cells])
            rows = [case.mesh.indices[case.mesh.indptr[c] : case.mesh.indptr[c + 1]] for c in gid]
            assert point_gid[flat].tolist() == np.concatenate(rows).tolist()


def test_the_joint_file_names_all_pieces_relative_to_itself(tmp_path):
    case = parted("tets", n_parts=3)
    write(tmp_path, case)
    root = ElementTree.parse(tmp_path / "parts.pvtu").getroot()
    grid = root.find("PUnstructuredGrid")
    assert grid.get("GhostLevel") == "1"
    assert [piece.get("Source") for piece in grid.iter("Piece")] == [
        f"pieces/part_{part:04d}.vtu" for part in range(3)
    ]
    names = {array.get("Name"): array.get("type") for array in grid.find("PCellData")}
    assert names["vtkGhostType"] == "UInt8"
    assert names["depth"] == "Float64"


def test_names_that_mean_something_in_xml(tmp_path):
    case = parted("tets")
    mesh = case.mesh.with_cell_field('a<b>&"c"', np.arange(case.mesh.n_cells))
    write(tmp_path, Parted(mesh, case.partition, case.halo))
    piece = meshio.read(tmp_path / "pieces" / "part_0000.vtu")
    assert 'a<b>&"c"' in piece.cell_data


def test_lists_have_a_file_of_their_own(tmp_path):
    case = parted("tets")
    write(tmp_path, case)
    with h5py.File(tmp_path / "lists.h5") as file:
        assert np.array_equal(file["sfcpart/send"][:], case.halo.send)
        assert len(file["sfcpart/cell_gid"]) == len(case.halo.owned) + len(case.halo.halo)


def test_failures_are_one_line(tmp_path):
    case, other = parted("tets"), parted("mixed")
    with pytest.raises(FileError, match="cannot be written"):
        write(tmp_path / "none", case)
    with pytest.raises(PartitionError, match="same mesh"):
        write(tmp_path, Parted(case.mesh, other.partition, other.halo))
