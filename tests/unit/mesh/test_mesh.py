"""The gate of the mesh: what is taken, what is refused and what the message says."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import MeshError
from sfcpart.mesh.kinds import KINDS, kind_of
from sfcpart.mesh.mesh import BoundaryGroup, FaceList, Mesh, Polyhedra
from tests.strategies import grid

SQUARE = np.array([(0, 0), (1, 0), (1, 1), (0, 1)], float)
RAISED = np.column_stack([SQUARE, [0, 0, 0, 1]])


def test_empty_meshes_are_refused(empty_call):
    with pytest.raises(MeshError, match="no cells"):
        empty_call()


@pytest.mark.parametrize(
    ("points", "cells", "message"),
    [
        (SQUARE, {"triangle": [[0, 1, 4]]}, "kind 'triangle': row 0 lists point 4; .* 0 to 3"),
        (SQUARE, {"triangle": [[0, 1, 2], [0, -1, 2]]}, "row 1 lists point -1"),
        (SQUARE, {"triangle": [[0, 1.5, 2]]}, "float64 values of shape .*; wanted integers"),
        (SQUARE, {"triangle": [[0, 1]]}, r"shape \(1, 2\); wanted \(n, 3\)"),
        (SQUARE, {"quadd": [[0, 1, 2, 3]]}, "'quadd' are not known; known are vertex, line"),
        (SQUARE, {"line": [[0, 1]]}, "dimension 1 at most"),
        (SQUARE, {"tetra": [[0, 1, 2, 3]]}, "dimension 3, but points with 2 coordinates"),
        (SQUARE[:, :1], {"line": [[0, 1]]}, r"shape \(4, 1\); wanted \(n, 2\) or \(n, 3\)"),
        (SQUARE * [1, np.nan], {"quad": [[0, 1, 2, 3]]}, r"point 0 has coordinates \[0.0, nan\]"),
        (
            np.array([(0, 0), (1, 0), (-np.inf, 1)]),
            {"triangle": [[0, 1, 2]]},
            r"point 2 has coordinates \[-inf, 1.0\]",
        ),
        (SQUARE.astype(complex), {"quad": [[0, 1, 2, 3]]}, "complex128; wanted real"),
        (RAISED, {"polyhedron": [[[0, 1, 2], [0, 1, 2], [0, 1, 2]]]}, "3 faces; wanted at least 4"),
        (RAISED, {"polyhedron": [[[0, 1], [1, 2], [2, 3], [3, 0]]]}, "fewer than 3 points"),
        (SQUARE, {"polygon": ([0, 3, 2], [0, 1, 2])}, "offsets of polygons go from 0 to 2"),
        ([[0, 0], [1]], {"triangle": [[0, 1, 2]]}, "point coordinates: rows of unequal length"),
        ([["a", "b"]], {"triangle": [[0, 1, 2]]}, "point coordinates: values of dtype <U1"),
        (SQUARE, {"quad": [[0, 1, 2], [0, 1, 2, 3]]}, "kind 'quad': rows of unequal length"),
        (SQUARE, {"triangle": [["a", "b", "c"]]}, "kind 'triangle': values of dtype <U1"),
        (SQUARE, {"polygon": [[[0, 1, 2]]]}, "polygons: wanted a list of points for each"),
        (RAISED, {"polyhedron": [[]]}, "cell 0 .polyhedron. has 0 faces"),
        (SQUARE, {"polygon": [[0, 1]]}, "kind 'polygon': row 0 has 2 points; wanted at least 3"),
    ],
)
def test_from_arrays_names_the_offender(points, cells, message):
    with pytest.raises(MeshError, match=message):
        Mesh.from_arrays(points, cells)


@pytest.mark.parametrize(
    ("kind", "indptr", "indices", "message"),
    [
        ([9], [0, 4], [0, 1, 2, 9], "row 0 lists point 9"),
        ([9], [0, 3], [0, 1, 2], r"cell 0 \(quad\) has 3 points; wanted 4"),
        ([4], [0, 3], [0, 1, 2], "cell 0 has VTK type 4, which is not known"),
        ([300], [0, 3], [0, 1, 2], "VTK type 300"),
        ([-1], [0, 3], [0, 1, 2], "VTK type -1"),
        ([5, 7], [0, 3, 5], [0, 1, 2, 2, 3], r"cell 1 \(polygon\) has 2 points; wanted at least 3"),
        ([5], [0, 2], [0, 1, 2], "go from 0 to 2; wanted to rise from 0 to 3"),
        ([5, 5], [0, 3], [0, 1, 2], r"shape \(2,\).* wanted 3 integers"),
        ([5], [0, 3], [[0, 1, 2]], r"of shape \(1, 3\); wanted integers, one behind the other"),
        ([42], [0, 4], [0, 1, 2, 3], "cell 0 is a polyhedron; wanted `polyhedra`"),
        ([], [0], [], "no cells"),
    ],
)
def test_from_cells_names_the_offender(kind, indptr, indices, message):
    with pytest.raises(MeshError, match=message):
        Mesh.from_cells(RAISED, np.array(kind, int), np.array(indptr), np.array(indices, int))


@pytest.mark.parametrize(
    ("face_cell", "face_measure", "measures", "message"),
    [
        ([[0, 2]], [1.0], [1, 1], r"face 0 joins cells \[0, 2\]"),
        ([[0, 1], [1, 1]], [1, 1], [1, 1], r"face 1 joins cells \[1, 1\]"),
        ([[-1, -1]], [1.0], [1, 1], r"face 0 joins cells \[-1, -1\]"),
        ([[0, -2]], [1.0], [1, 1], r"face 0 joins cells \[0, -2\]"),
        ([[0, 1]], [-1.0], [1, 1], "face 0 has measure -1.0"),
        ([[0, 1]], [np.nan], [1, 1], "face 0 has measure nan"),
        ([[0, 1]], [1, 2], [1, 1], "measures of faces"),
        ([[0, 1]], [1.0], [1, np.inf], "cell 1 has measure inf"),
        ([[0, 1]], [1.0], [1], "measures of cells"),
        ([[0.0, 1.0]], [1.0], [1, 1], "float64"),
        ([0, 1], [1.0], [1, 1], r"shape \(2,\)"),
    ],
)
def test_from_faces_names_the_offender(face_cell, face_measure, measures, message):
    with pytest.raises(MeshError, match=message):
        Mesh.from_faces(face_cell, face_measure, [[0, 0], [1, 0]], measures)


def test_from_centers_names_the_offender():
    with pytest.raises(MeshError, match=r"cell centre 1 has coordinates \[nan, 0.0\]"):
        Mesh.from_centers([[0, 0], [np.nan, 0]])
    with pytest.raises(MeshError, match="cell 0 has measure -1"):
        Mesh.from_centers([[0, 0]], measures=[-1])


def test_fields_need_one_row_a_cell():
    with pytest.raises(MeshError, match=r"field 'u' has shape \(3,\); wanted 1 rows"):
        Mesh.from_arrays(SQUARE, {"quad": [[0, 1, 2, 3]]}, cell_fields={"u": [1, 2, 3]})
    with pytest.raises(MeshError, match="point field 'T'"):
        Mesh.from_arrays(SQUARE, {"quad": [[0, 1, 2, 3]]}, point_fields={"T": [1]})
    with pytest.raises(MeshError, match="wanted 1 rows"):
        grid((1, 1)).with_cell_field("u", 3.0)


def test_arrays_are_read_only_views_where_the_dtype_fits():
    cells = np.array([[0, 1, 2, 3]], np.int32)
    mesh = Mesh.from_arrays(SQUARE, {"quad": cells})
    assert np.shares_memory(mesh.points, SQUARE) and np.shares_memory(mesh.indices, cells)
    arrays = [mesh.points, mesh.kind, mesh.indptr, mesh.indices, mesh.centers, mesh.measures]
    assert not any(array.flags.writeable for array in arrays)
    assert SQUARE.flags.writeable
    assert (mesh.kind.dtype, mesh.indptr.dtype) == (np.uint8, np.int64)
    assert Mesh.from_arrays(SQUARE, {"quad": cells.astype(np.uint64)}).indices.dtype == np.int32


def test_foreign_byte_orders_are_turned():
    mesh = Mesh.from_arrays(
        SQUARE.astype(">f8"),
        {"quad": np.array([[0, 1, 2, 3]], ">i4")},
        cell_fields={"cost": np.array([2.5], ">f4")},
    )
    assert mesh.measures.tolist() == [1.0]
    assert mesh.cell_fields["cost"].dtype == np.dtype("=f4")
    assert mesh.cell_fields["cost"].dtype.isnative


def test_lower_blocks_become_boundary_groups_and_fields_are_cut():
    own = BoundaryGroup("inlet", 7, np.array([3], np.uint8), np.array([0, 2]), np.array([3, 0]))
    mesh = Mesh.from_arrays(
        SQUARE,
        [("line", [[0, 1], [1, 2]]), ("triangle", [[0, 1, 2]]), ("triangle", [[0, 2, 3]])],
        cell_fields={"tag": [10, 11, 1, 2], "own": [5, 6]},
        boundary=[own],
    )
    assert [group.name for group in mesh.boundary] == ["line", "inlet"]
    assert mesh.boundary[0].indices.tolist() == [0, 1, 1, 2]
    assert mesh.cell_fields["tag"].tolist() == [1, 2]
    assert mesh.cell_fields["own"].tolist() == [5, 6]
    assert mesh.indptr.tolist() == [0, 3, 6]


def test_interleaved_kinds_keep_their_order_and_boundary_is_cut_out():
    points = np.array([(0, 0), (1, 0), (2, 0), (0, 1), (1, 1), (2, 1)], float)
    mesh = Mesh.from_cells(
        points,
        [5, 3, 9, 5, 3],
        [0, 3, 5, 9, 12, 14],
        [0, 1, 3, 0, 1, 1, 2, 5, 4, 1, 4, 3, 1, 2],
        cell_fields={"id": np.arange(5)},
    )
    assert mesh.kind.tolist() == [5, 9, 5]
    assert mesh.cell_fields["id"].tolist() == [0, 2, 3]
    assert mesh.measures.tolist() == [0.5, 1.0, 0.5]
    assert mesh.boundary[0].indices.tolist() == [0, 1, 1, 2]


def test_polyhedra_beside_faces_of_the_boundary():
    cube = grid((2, 1, 1))
    rows = np.asarray(cube.indices).reshape(2, 8)
    ring = [[0, 4, 7, 3], [1, 2, 6, 5], [0, 1, 5, 4], [3, 7, 6, 2], [0, 3, 2, 1], [4, 5, 6, 7]]
    # the quad comes first: rows of polyhedra must move up when it is cut out
    faces = np.concatenate([rows[0][ring].reshape(-1), rows[1][ring].reshape(-1)])
    mesh = Mesh.from_cells(
        cube.points,
        [9, 42, 42],
        [0, 4, 12, 20],
        np.concatenate([rows[0][:4], rows[0], rows[1]]),
        polyhedra=Polyhedra(np.arange(0, 49, 4), faces, np.array([0, 0, 6, 12]), np.arange(12)),
    )
    assert mesh.n_cells == 2
    assert mesh.measures.tolist() == [1.0, 1.0]
    assert mesh.polyhedra.cell_indptr.tolist() == [0, 6, 12]
    assert mesh.boundary[0].name == "quad"


def test_from_faces_puts_the_absent_cell_second():
    mesh = Mesh.from_faces([[-1, 0], [0, 1]], [1, 2], [[0, 0], [1, 0]], [1, 1])
    assert isinstance(mesh.faces, FaceList)
    assert mesh.faces.cell.tolist() == [[0, -1], [0, 1]]
    assert mesh.faces.cell.dtype == np.int32
    assert (mesh.n_points, mesh.dim, mesh.kind.tolist()) == (0, 2, [1, 1])
    assert mesh.signed_measures.tolist() == [1, 1]


def test_a_cell_field_can_be_added_without_touching_the_mesh():
    mesh = grid((2, 2))
    centers = mesh.centers
    more = mesh.with_cell_field("part", [0, 0, 1, 1])
    assert "part" not in mesh.cell_fields
    assert more.centers is centers
    with pytest.raises(TypeError):
        more.cell_fields["part"] = 0


def test_quadratic_kinds_use_their_corners_only():
    points = np.concatenate([SQUARE, SQUARE * 7])
    mesh = Mesh.from_arrays(points, {"quad8": [np.arange(8)]})
    assert mesh.measures.tolist() == [1.0]


def test_repr_tells_what_there_is():
    assert repr(grid((2, 2, 1))) == "Mesh(4 hexahedron; dim 3 in 3-D; 18 points)"


def test_kinds_are_consistent():
    for code, kind in KINDS.items():
        assert kind_of(kind.name) == kind
        assert kind.code == code
        corners = {i for face in kind.faces for i in face}
        assert corners == set(range(kind.n_corners)) or kind.dim == 0
        assert kind.n_nodes == 0 or kind.n_nodes >= kind.n_corners
        if kind.dim == 3 and kind.n_corners:  # Euler's formula: faces close up
            edges = [(f[i - 1], f[i]) for f in kind.faces for i in range(len(f))]
            assert len(set(edges)) == len(edges)
            assert {(b, a) for a, b in edges} == set(edges)
            assert kind.n_corners - len(edges) // 2 + len(kind.faces) == 2
