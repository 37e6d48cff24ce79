"""The arrays of a mesh and what follows from them: sizes, centres, measures."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np

from sfcpart.dtypes import Array, FloatArray, Int64Array, IntArray, KindArray
from sfcpart.mesh.cell_arrays import bundle
from sfcpart.mesh.gate import frozen
from sfcpart.mesh.geometry import centers_and_signed_measures
from sfcpart.mesh.kinds import KINDS, kind_tables
from sfcpart.mesh.pieces import BoundaryGroup, FaceList, Polyhedra

if TYPE_CHECKING:
    from sfcpart.kernels.mesh.cells import CellArrays

__all__ = ["MeshArrays"]

_EMPTY: Mapping[str, Any] = MappingProxyType({})
T = TypeVar("T")


@dataclass(frozen=True, eq=False)
class MeshArrays:
    """What a `Mesh` holds (its docstring tells the shapes), with everything derived from it."""

    points: FloatArray | None
    kind: KindArray
    indptr: Int64Array
    indices: IntArray
    polyhedra: Polyhedra | None = None
    faces: FaceList | None = None
    given_center: FloatArray | None = None
    given_measure: FloatArray | None = None
    cell_fields: Mapping[str, Array] = field(default_factory=lambda: _EMPTY)
    point_fields: Mapping[str, Array] = field(default_factory=lambda: _EMPTY)
    boundary: tuple[BoundaryGroup, ...] = ()
    _derived: dict[str, Any] = field(default_factory=dict, init=False, repr=False)

    @property
    def n_cells(self) -> int:
        """Number of cells."""
        return len(self.kind)

    @property
    def n_points(self) -> int:
        """Number of points, 0 for meshes without."""
        return 0 if self.points is None else len(self.points)

    @property
    def dim(self) -> int:
        """Topological dimension of the cells: 2 or 3."""
        if self.points is None:
            return self.space_dim
        return self.keep("dim", lambda: int(kind_tables().dim[self.kind[0]]))

    @property
    def space_dim(self) -> int:
        """Dimension of the centres: 2 for cells in the plane, a constant third column dropped."""
        if self.given_center is not None:
            return int(self.given_center.shape[1])
        return self.keep("space_dim", self._find_space_dim)

    @property
    def centers(self) -> FloatArray:
        """Centroids of the cells, (n_cells, space_dim) float64, computed on first use."""
        if self.given_center is not None:
            return self.given_center
        return self.keep("geometry", self._find_geometry)[0]

    @property
    def signed_measures(self) -> FloatArray:
        """Measures with the sign of the order of corners (`geometry`), (n_cells,) float64."""
        if self.given_center is not None:
            return self.measures
        return self.keep("geometry", self._find_geometry)[1]

    @property
    def measures(self) -> FloatArray:
        """Areas or volumes of the cells, (n_cells,) float64 >= 0; 1 each if not known."""
        if self.given_measure is not None:
            return self.given_measure
        return self.keep("measures", self._find_measures)

    def keep(self, name: str, make: Callable[[], T]) -> T:
        """Return a derived value, made on first use and then kept."""
        if name not in self._derived:
            self._derived[name] = make()
        value: T = self._derived[name]
        return value

    def cell_arrays(self) -> CellArrays:
        """Return the cells as kernels take them (`sfcpart.kernels.mesh.cells.CellArrays`)."""
        cells = (self.kind, self.indptr, self.indices, self.polyhedra)
        return self.keep("cell_arrays", lambda: bundle(*cells))

    def __repr__(self) -> str:
        """Say what the mesh holds in one line."""
        codes, counts = np.unique(self.kind, return_counts=True)
        what = ", ".join(f"{n} {KINDS[int(k)].name}" for k, n in zip(codes, counts, strict=True))
        return f"Mesh({what}; dim {self.dim} in {self.space_dim}-D; {self.n_points} points)"

    def _find_space_dim(self) -> int:
        """See whether plane cells lie in a plane of constant third coordinate."""
        assert self.points is not None
        if self.dim == 3 or self.points.shape[1] == 2:
            return int(self.points.shape[1])
        third = self.points[:, 2]
        return 2 if third.min() == third.max() else 3

    def _find_geometry(self) -> tuple[FloatArray, FloatArray]:
        """Compute centroids and signed measures."""
        assert self.points is not None
        centers, measures = centers_and_signed_measures(
            self.points, self.cell_arrays(), dim=self.dim, space_dim=self.space_dim
        )
        return frozen(centers), frozen(measures)

    def _find_measures(self) -> FloatArray:
        """Drop the signs, without a copy where there are none."""
        if self.given_center is not None:
            return frozen(np.ones(self.n_cells))
        signed = self.signed_measures
        return signed if signed.min(initial=0.0) >= 0 else frozen(np.abs(signed))
