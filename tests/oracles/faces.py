"""Slow, obvious twins of the cell graph and of cell geometry: dictionaries, numpy."""

from __future__ import annotations

from collections import Counter, defaultdict
from itertools import combinations

import numpy as np

from sfcpart.mesh.kinds import KINDS, POLYGON, POLYHEDRON


def cell_faces(mesh):
    """List the faces of every cell as tuples of points."""
    faces = []
    for c, kind in enumerate(mesh.kind):
        row = mesh.indices[mesh.indptr[c] : mesh.indptr[c + 1]].tolist()
        if kind == POLYGON:
            faces.append([(row[i], row[(i + 1) % len(row)]) for i in range(len(row))])
        elif kind == POLYHEDRON:
            p = mesh.polyhedra
            mine = p.cell_indices[p.cell_indptr[c] : p.cell_indptr[c + 1]]
            faces.append(
                [
                    tuple(p.face_indices[p.face_indptr[f] : p.face_indptr[f + 1]].tolist())
                    for f in mine
                ]
            )
        else:
            faces.append([tuple(row[i] for i in face) for face in KINDS[int(kind)].faces])
    return faces


def neighbours(mesh):
    """Count shared faces of each pair of cells; count boundary faces of each cell."""
    cells_of = defaultdict(list)
    for c, faces in enumerate(cell_faces(mesh)):
        for face in faces:
            if len(set(face)) >= mesh.dim:
                cells_of[frozenset(face)].append(c)
    pairs, boundary = Counter(), np.zeros(mesh.n_cells, int)
    for sides in cells_of.values():
        cells = sorted(set(sides))
        for pair in combinations(cells, 2):
            pairs[pair] += 1
        if len(sides) == 1:
            boundary[cells[0]] += 1
    return pairs, boundary


def vector_area(points, face):
    """Length of an edge, or norm of half the sum of cross products about the corners' mean."""
    x = np.zeros((len(face), 3))
    x[:, : points.shape[1]] = points[list(face)]
    if len(face) == 2:
        return float(np.linalg.norm(x[1] - x[0]))
    x = x - x.mean(axis=0)
    return float(np.linalg.norm(np.cross(x, np.roll(x, -1, axis=0)).sum(axis=0)) / 2)


def solid(points, faces):
    """Signed volume and centroid of a body of outward faces, cut into tetrahedra at the origin."""
    volume, moment = 0.0, np.zeros(3)
    for face in faces:
        x = points[list(face)]
        mean = x.mean(axis=0)
        for a, b in zip(x, np.roll(x, -1, axis=0), strict=True):
            v = np.linalg.det(np.stack([mean, a, b])) / 6
            volume += v
            moment += v * (mean + a + b) / 4
    return volume, moment / volume
