"""Write meshes made by rule: VTKHDF with h5py, MSH text by hand, others with meshio."""

from __future__ import annotations

from pathlib import Path

import h5py
import meshio
import numpy as np

from sfcpart.mesh.shape import Shape

KINDS = {"triangle": 5, "quad": 9, "tetra": 10, "hexahedron": 12, "wedge": 13, "pyramid": 14}
KINDS_MSH = {"triangle": 2, "quad": 3}
POLYHEDRON = 42


def write_meshio(path: Path, shape: Shape, **options) -> None:
    """Write points, cells and fields; boundary groups are left out."""
    ends = np.cumsum([len(block) for block in shape.cells.values()])[:-1]
    fields = {name: np.split(array, ends) for name, array in shape.cell_fields.items()}
    points = np.zeros((len(shape.points), 3))
    points[:, : shape.points.shape[1]] = shape.points
    mesh = meshio.Mesh(points, list(shape.cells.items()), cell_data=fields)
    meshio.write(path, mesh, **options)


def write_msh(path: Path, shape: Shape, *, regions: list[str]) -> None:
    """Write 2-D cells as MSH 2.2 text, which people can read.

    Boundary groups and the values of the field "region" become physical groups with names. Other
    fields are left out: meshio 5.3.5 fails to read fields of such files back.
    """
    groups = list(shape.boundary.items())
    names = [(1, name) for name, _ in groups] + [(2, name) for name in regions]
    lines = ["$MeshFormat", "2.2 0 8", "$EndMeshFormat", "$PhysicalNames", str(len(names))]
    lines += [f'{dim} {tag} "{name}"' for tag, (dim, name) in enumerate(names, start=1)]
    lines += ["$EndPhysicalNames", "$Nodes", str(len(shape.points))]
    lines += [f"{i} {x!r} {y!r} 0" for i, (x, y) in enumerate(shape.points.tolist(), start=1)]
    lines += ["$EndNodes", "$Elements"]
    region = iter(shape.cell_fields["region"] + len(groups) + 1)
    rows = [
        (KINDS_MSH[name], next(region), row) for name, block in shape.cells.items() for row in block
    ]
    rows += [(1, tag, row) for tag, (_, group) in enumerate(groups, start=1) for row in group]
    lines.append(str(len(rows)))
    for i, (kind, tag, row) in enumerate(rows, start=1):
        lines.append(f"{i} {kind} 2 {tag} {tag} {' '.join(map(str, row + 1))}")
    path.write_text("\n".join([*lines, "$EndElements", ""]))


def write_vtkhdf(path: Path, shape: Shape) -> None:
    """Write one part of VTKHDF UnstructuredGrid; polyhedra alone or other cells alone."""
    solid = "polyhedron" in shape.cells
    with h5py.File(path, "w") as file:
        root = file.create_group("VTKHDF")
        root.attrs["Version"] = np.array([2, 5 if solid else 2])
        root.attrs.create("Type", np.bytes_("UnstructuredGrid"), dtype="S16")
        points = np.zeros((len(shape.points), 3))
        points[:, : shape.points.shape[1]] = shape.points
        root["Points"] = points
        root["NumberOfPoints"] = np.array([len(points)])
        root["NumberOfCells"] = np.array([shape.n_cells])
        connectivity = _polyhedra(root, shape) if solid else _blocks(root, shape)
        root["NumberOfConnectivityIds"] = np.array([connectivity])
        for name, array in shape.cell_fields.items():
            root[f"CellData/{name}"] = array


def _blocks(root, shape: Shape) -> int:
    """Write blocks of fixed width one after the other, without joining them in memory."""
    widths = [block.shape[1] for block in shape.cells.values()]
    counts = [len(block) for block in shape.cells.values()]
    total = int(np.dot(widths, counts))
    ids = root.create_dataset("Connectivity", total, next(iter(shape.cells.values())).dtype)
    at = 0
    for block in shape.cells.values():
        ids[at : at + block.size] = block.ravel()
        at += block.size
    root["Offsets"] = np.concatenate([[0], np.cumsum(np.repeat(widths, counts))])
    root["Types"] = np.repeat(np.array([KINDS[name] for name in shape.cells], np.uint8), counts)
    return total


def _polyhedra(root, shape: Shape) -> int:
    """Write polyhedra; a face that two cells share is stored once."""
    number: dict[tuple[int, ...], int] = {}
    faces: list[list[int]] = []
    cell_faces, cell_points = [], []
    for cell in shape.cells["polyhedron"]:
        for face in cell:
            if number.setdefault(tuple(sorted(face)), len(faces)) == len(faces):
                faces.append(face)
        cell_faces.append([number[tuple(sorted(face))] for face in cell])
        cell_points.append(sorted({point for face in cell for point in face}))
    root["Types"] = np.full(shape.n_cells, POLYHEDRON, np.uint8)
    for ids, ends, rows in (
        ("Connectivity", "Offsets", cell_points),
        ("FaceConnectivity", "FaceOffsets", faces),
        ("PolyhedronToFaces", "PolyhedronOffsets", cell_faces),
    ):
        root[ids] = np.concatenate(rows).astype(np.int64)
        root[ends] = np.cumsum([0, *map(len, rows)])
    root["NumberOfFaces"] = np.array([len(faces)])
    root["NumberOfFaceConnectivityIds"] = np.array([sum(map(len, faces))])
    root["NumberOfPolyhedronToFaceIds"] = np.array([sum(map(len, cell_faces))])
    return sum(map(len, cell_points))
