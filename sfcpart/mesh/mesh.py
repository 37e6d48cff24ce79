"""The mesh value: points, cells in file order, boundary groups and fields; ways to make one."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.errors import MeshError
from sfcpart.mesh import build
from sfcpart.mesh.arrays import MeshArrays
from sfcpart.mesh.gate import (
    as_array,
    check_fields,
    check_indices,
    check_kinds,
    check_offsets,
    check_positions,
    check_sizes,
    frozen,
    parse_blocks,
)
from sfcpart.mesh.kinds import kind_tables
from sfcpart.mesh.merge import check_still_cells, coincident_points, with_new_numbers
from sfcpart.mesh.pieces import BoundaryGroup, FaceList, Polyhedra

__all__ = ["BoundaryGroup", "FaceList", "Mesh", "Polyhedra"]


@dataclass(frozen=True, eq=False, repr=False)
class Mesh(MeshArrays):
    """Cells of one dimension (2 or 3), in the file's own order, over read-only arrays.

    Attributes
    ----------
    points : (n_points, space_dim) float64, or None
        None for meshes given by faces or by centres.
    kind : (n_cells,) uint8
        VTK type code of each cell (open standard); `sfcpart.mesh.kinds` has the tables.
    indptr : (n_cells + 1,) int64
    indices : (sum,) int32 or int64
        Points of each cell in VTK order: corners first, then mid-side points if quadratic.
    polyhedra : Polyhedra or None
    faces : FaceList or None
        Given faces: they are then the truth, and points only for drawing.
    given_center, given_measure : arrays or None
        Centres and measures of meshes without points.
    cell_fields, point_fields : mapping of str to array
        Arrays of n_cells (n_points) rows.
    boundary : tuple of BoundaryGroup

    Examples
    --------
    >>> mesh = Mesh.from_arrays([[0, 0], [2, 0], [2, 1], [0, 1]], {"quad": [[0, 1, 2, 3]]})
    >>> mesh
    Mesh(1 quad; dim 2 in 2-D; 4 points)
    >>> mesh.centers.tolist(), mesh.measures.tolist()
    ([[1.0, 0.5]], [2.0])
    """

    @classmethod
    def from_arrays(
        cls,
        points: ArrayLike,
        cells: Mapping[str, Any] | Iterable[tuple[str, Any]],
        *,
        cell_fields: Mapping[str, ArrayLike] | None = None,
        point_fields: Mapping[str, ArrayLike] | None = None,
        boundary: Sequence[BoundaryGroup] = (),
    ) -> Mesh:
        """Make a mesh of points and blocks of cells.

        Parameters
        ----------
        points : (n_points, 2) or (n_points, 3) real numbers
            Not copied if float64 and C-contiguous: do not change them afterwards.
        cells : mapping or sequence of pairs
            `{"tetra": (n, 4) integers, ...}` or `[("tetra", ...), ...]` in file order, with
            meshio's names. "polygon": a list of lists, a table, or (indptr, indices).
            "polyhedron": for each cell a list of faces, each a list of points.
            The cells of highest dimension are the mesh; other blocks become boundary groups
            named by their kind.
        cell_fields, point_fields : mapping of str to array, optional
            One row a cell (or one row an element of every block, cut to the cells) or a point.
        boundary : sequence of BoundaryGroup, optional
            Further groups, kept as they are.

        Returns
        -------
        Mesh

        Raises
        ------
        MeshError
            No cells, an unknown kind, a coordinate that is not finite, a point out of range,
            a field of another length. The message names the first offender.

        Notes
        -----
        O(size of the connectivity); int64 connectivity is cast to int32 where that fits.

        Examples
        --------
        >>> mesh = Mesh.from_arrays(
        ...     [[0, 0], [2, 0], [2, 1], [0, 1], [3, 0]],
        ...     {"quad": [[0, 1, 2, 3]], "triangle": [[1, 4, 2]], "line": [[0, 1]]},
        ... )
        >>> mesh.n_cells, mesh.dim, mesh.measures.tolist(), mesh.boundary[0].name
        (2, 2, [2.0, 0.5], 'line')
        """
        position = check_positions(points, "point")
        blocks = parse_blocks(cells)
        dim = build.check_dim([block.kind.dim for block in blocks], position.shape[1])
        main = [block for block in blocks if block.kind.dim == dim]
        lower = [block for block in blocks if block.kind.dim < dim]
        kind, indptr, indices = build.join(main, len(position))
        belongs = np.repeat([b.kind.dim == dim for b in blocks], [b.n for b in blocks])
        return cls(
            points=position,
            kind=kind,
            indptr=indptr,
            indices=indices,
            polyhedra=build.polyhedra(main, len(position)),
            cell_fields=build.cut_fields(cell_fields, belongs),
            point_fields=check_fields(point_fields, len(position), "point"),
            boundary=(*(build.group(block, len(position)) for block in lower), *boundary),
        )

    @classmethod
    def from_cells(
        cls,
        points: ArrayLike,
        kind: ArrayLike,
        indptr: ArrayLike,
        indices: ArrayLike,
        *,
        polyhedra: Polyhedra | None = None,
        cell_fields: Mapping[str, ArrayLike] | None = None,
        point_fields: Mapping[str, ArrayLike] | None = None,
        boundary: Sequence[BoundaryGroup] = (),
    ) -> Mesh:
        """Make a mesh of cells in CSR form, kinds interleaved as they stand in a file.

        Parameters
        ----------
        points : (n_points, 2) or (n_points, 3) real numbers
        kind : (n,) integers
            VTK type codes.
        indptr : (n + 1,) integers
        indices : (sum,) integers
            Points of each cell in VTK order; for a polyhedron each of its points once.
        polyhedra : Polyhedra, optional
            Their faces; `cell_indptr` has n + 1 entries. Needed if kind 42 occurs.
        cell_fields, point_fields, boundary
            As in `from_arrays`; fields of n rows are cut to the cells of highest dimension.

        Returns
        -------
        Mesh
            Elements of lower dimension become boundary groups, one for each kind.

        Raises
        ------
        MeshError
            As `from_arrays`.

        Examples
        --------
        >>> points = [[0, 0], [2, 0], [2, 1], [0, 1], [3, 0]]
        >>> mesh = Mesh.from_cells(points, [5, 9], [0, 3, 7], [1, 4, 2, 0, 1, 2, 3])
        >>> mesh.kind.tolist(), mesh.measures.tolist()
        ([5, 9], [0.5, 2.0])
        """
        position = check_positions(points, "point")
        flat = as_array(indices, "cells")
        offset = check_offsets(indptr, np.size(kind), flat.size, "cells")
        code = check_kinds(kind, offset)
        flat = frozen(check_indices(flat, len(position), "point", offset))
        dims = kind_tables().dim[code]
        belongs = dims == build.check_dim(np.unique(dims).tolist(), position.shape[1])
        groups: tuple[BoundaryGroup, ...] = ()
        if not belongs.all():
            groups = build.groups_by_kind(code, offset, flat, ~belongs)
            offset, flat = build.take_rows(offset, flat, belongs)
            code, polyhedra = frozen(code[belongs]), build.cut_polyhedra(polyhedra, belongs)
        return cls(
            points=position,
            kind=code,
            indptr=offset,
            indices=flat,
            polyhedra=build.check_polyhedra(polyhedra, code, len(position)),
            cell_fields=build.cut_fields(cell_fields, belongs),
            point_fields=check_fields(point_fields, len(position), "point"),
            boundary=(*groups, *boundary),
        )

    @classmethod
    def from_faces(
        cls,
        face_cell: ArrayLike,
        face_measure: ArrayLike,
        centers: ArrayLike,
        measures: ArrayLike,
        *,
        cell_fields: Mapping[str, ArrayLike] | None = None,
    ) -> Mesh:
        """Make a mesh from faces, as a finite-volume code holds them (any cells, hanging nodes).

        Parameters
        ----------
        face_cell : (n_faces, 2) integers
            The two cells of each face; -1 for the absent one on the boundary.
        face_measure : (n_faces,) real numbers >= 0
        centers : (n_cells, 2) or (n_cells, 3) real numbers
        measures : (n_cells,) real numbers >= 0
        cell_fields : mapping of str to array, optional

        Returns
        -------
        Mesh
            Without points; its cells are of kind 1 (vertex).

        Raises
        ------
        MeshError
            A cell out of range, a face without a cell or between a cell and itself, a
            coordinate that is not finite, a negative measure.

        Examples
        --------
        >>> mesh = Mesh.from_faces([[0, 1], [1, -1]], [2.0, 1.0], [[0, 0], [1, 0]], [1.0, 1.0])
        >>> mesh.n_cells, mesh.dim, mesh.faces.cell.tolist()
        (2, 2, [[0, 1], [1, -1]])
        """
        center = check_positions(centers, "cell centre")
        pair = build.check_face_cells(face_cell, len(center))
        area = check_sizes(face_measure, len(pair), "face")
        size = check_sizes(measures, len(center), "cell")
        return cls(
            **build.bare_cells(len(center)),
            faces=FaceList(cell=pair, measure=area),
            given_center=center,
            given_measure=size,
            cell_fields=check_fields(cell_fields, len(center), "cell"),
        )

    @classmethod
    def from_centers(
        cls,
        centers: ArrayLike,
        *,
        measures: ArrayLike | None = None,
        cell_fields: Mapping[str, ArrayLike] | None = None,
    ) -> Mesh:
        """Make a mesh of bare cell centres, which has no faces.

        Parameters
        ----------
        centers : (n_cells, 2) or (n_cells, 3) real numbers
            Not copied if float64 and C-contiguous.
        measures : (n_cells,) real numbers >= 0, optional
            1 each by default.
        cell_fields : mapping of str to array, optional

        Returns
        -------
        Mesh
            Without points; its cells are of kind 1 (vertex).

        Raises
        ------
        MeshError
            No centres, a coordinate that is not finite, a negative measure.

        Examples
        --------
        >>> mesh = Mesh.from_centers([[0.0, 0.5], [1.0, 0.5]])
        >>> mesh.n_cells, mesh.dim, mesh.measures.tolist()
        (2, 2, [1.0, 1.0])
        """
        center = check_positions(centers, "cell centre")
        size = None if measures is None else check_sizes(measures, len(center), "cell")
        return cls(
            **build.bare_cells(len(center)),
            given_center=center,
            given_measure=size,
            cell_fields=check_fields(cell_fields, len(center), "cell"),
        )

    def with_cell_field(self, name: str, values: ArrayLike) -> Mesh:
        """Return the same mesh with a cell field added or replaced.

        Parameters
        ----------
        name : str
        values : (n_cells, ...) array

        Returns
        -------
        Mesh
            What is derived already, such as centres and the cell graph, goes along.

        Raises
        ------
        MeshError
            If `values` has not one row a cell.

        Examples
        --------
        >>> mesh = Mesh.from_centers([[0.0, 0.5], [1.0, 0.5]])
        >>> sorted(mesh.with_cell_field("part", [0, 1]).cell_fields)
        ['part']
        """
        checked = check_fields({name: values}, self.n_cells, "cell")
        mesh = replace(self, cell_fields=MappingProxyType({**self.cell_fields, **checked}))
        mesh._derived.update(self._derived)
        return mesh

    def with_points_merged(self, tolerance: float) -> Mesh:
        """Return the mesh with points that coincide made one, so that cracks close.

        Parameters
        ----------
        tolerance : float
            Largest distance of two points that are one, >= 0; chains of such points are one too,
            so keep it well below the shortest edge. The lowest point of a group stays.

        Returns
        -------
        Mesh
            Cells, their order and fields as before; this very mesh if no points coincide.

        Raises
        ------
        MeshError
            If the mesh has no points, the tolerance is negative or not finite, or so wide that
            it makes a cell a single point.

        Notes
        -----
        O(n log n) in the number of points (`sfcpart.mesh.merge`).

        Examples
        --------
        >>> points = [[0, 0], [1, 0], [0, 1], [1, 0], [1, 1], [0, 1]]
        >>> mesh = Mesh.from_arrays(points, {"triangle": [[0, 1, 2], [3, 4, 5]]})
        >>> mesh.with_points_merged(1e-9).indices.tolist()
        [0, 1, 2, 1, 3, 2]
        """
        if self.points is None:
            raise MeshError("the mesh has no points to merge: it is known by faces or centres only")
        lowest = coincident_points(self.points, tolerance)
        kept = lowest == np.arange(len(lowest))
        if kept.all():
            return self
        check_still_cells(self, lowest, tolerance)
        fields = {name: frozen(values[kept]) for name, values in self.point_fields.items()}
        return replace(
            self,
            points=frozen(self.points[kept]),
            point_fields=MappingProxyType(fields),
            **with_new_numbers((np.cumsum(kept) - 1)[lowest], self),
        )
