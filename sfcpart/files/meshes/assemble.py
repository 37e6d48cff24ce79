"""Make a mesh of what a reader found: check it, and tell cells from boundary groups.

The elements of the highest dimension become the cells, in file order; the others become named
boundary groups. Cost: a few passes over the elements; arrays of a file that holds only cells
are taken over without a copy.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from sfcpart.dtypes import KIND, Array, BoolArray
from sfcpart.errors import MeshError
from sfcpart.files.meshes.raw import RawMesh, select_rows, take_elements
from sfcpart.mesh.gate import check_indices, check_kinds, check_offsets, frozen
from sfcpart.mesh.kinds import KINDS, kind_tables
from sfcpart.mesh.mesh import BoundaryGroup, Mesh

__all__ = ["TAG_FIELDS", "as_numbers", "build_mesh", "cell_dimension", "tag_label"]

TAG_FIELDS = (
    "gmsh:physical",
    "su2:tag",
    "medit:ref",
    "ugrid:ref",
    "nastran:ref",
    "netgen:index",
    "cell_tags",
    "avsucd:material",
    "gmsh:geometrical",
)
"""Fields that formats use to tell boundary patches apart, most telling first."""


def build_mesh(raw: RawMesh, source: str) -> Mesh:
    """Check what a file gave and make a mesh of it.

    Parameters
    ----------
    raw : RawMesh
        Its arrays may be taken over without a copy.
    source : str
        Name of the file, for messages.

    Raises
    ------
    MeshError
        If there are no cells, unknown kinds of elements, wrong node counts, point ids out of
        range, or coordinates that are not finite. The message starts with `source`.
    """
    try:
        return _build(raw)
    except MeshError as error:
        raise MeshError(f"{source}: {error}") from error


def _build(raw: RawMesh) -> Mesh:
    """Make the mesh, with messages that do not name the file yet."""
    dimension = element_dimension(raw.kind)
    fields = _cell_fields(raw, dimension)
    is_cell = dimension == dimension.max()
    groups: tuple[BoundaryGroup, ...] = ()
    if not is_cell.all():
        _check_elements(raw)
        groups = _boundary_groups(raw, dimension, fields)
        raw = take_elements(raw, is_cell)
        fields = {name: values[is_cell] for name, values in fields.items()}
    point_fields = {n: _numbers(v, len(raw.points)) for n, v in raw.point_fields.items()}
    return Mesh.from_cells(
        raw.points,
        raw.kind,
        raw.indptr,
        raw.indices,
        polyhedra=raw.polyhedra,
        cell_fields=fields,
        point_fields={n: v for n, v in point_fields.items() if v is not None},
        boundary=groups,
    )


def element_dimension(kind: Array) -> Array:
    """Return the dimension of every element; refuse kinds nobody here knows, and no cells."""
    codes, counts = np.unique(kind, return_counts=True)
    cell_dimension(codes, counts)
    dimension: Array = kind_tables().dim[kind]
    return dimension


def cell_dimension(codes: Array, counts: Array) -> int:
    """Return the dimension of the cells, given how many elements of each kind there are."""
    if not len(codes):
        raise MeshError("holds no cells")
    dimension = kind_tables().dim[codes]
    strange = dimension < 0
    if strange.any():
        raise MeshError(f"holds cells that cannot be used: {_listed(codes, counts, strange)}")
    if dimension.max() < 1:
        raise MeshError(
            f"holds no cells, only {_listed(codes, counts)}; "
            "use Mesh.from_centers to split single points"
        )
    if dimension.max() < 2:
        raise MeshError(f"holds no cells of dimension 2 or 3, only {_listed(codes, counts)}")
    return int(dimension.max())


def _listed(codes: Array, counts: Array, which: Array | None = None) -> str:
    """Say how many elements there are of each kind."""
    some = slice(None) if which is None else which
    pairs = zip(codes[some].tolist(), counts[some].tolist(), strict=True)
    return ", ".join(f"{n} {_name(c)}" for c, n in pairs)


def _name(code: int) -> str:
    """Return the name of a kind, or its number."""
    return KINDS[code].name if code in KINDS else f"of VTK type {code}"


def _check_elements(raw: RawMesh) -> None:
    """Check elements of all dimensions before some are taken out."""
    indptr = check_offsets(raw.indptr, len(raw.kind), len(raw.indices), "elements")
    check_kinds(raw.kind, indptr)
    check_indices(raw.indices, len(raw.points), "point", indptr)
    if raw.polyhedra is not None:
        rows = raw.polyhedra
        n_faces = len(rows.face_indptr) - 1
        check_offsets(rows.cell_indptr, len(raw.kind), len(rows.cell_indices), "polyhedra")
        check_offsets(rows.face_indptr, n_faces, len(rows.face_indices), "faces of polyhedra")
        check_indices(rows.cell_indices, n_faces, "face", rows.cell_indptr)


def _cell_fields(raw: RawMesh, dimension: Array) -> dict[str, Array]:
    """Return the fields that hold numbers, and sets of cells as fields of 0 and 1."""
    found = {name: _numbers(values, len(raw.kind)) for name, values in raw.cell_fields.items()}
    fields = {name: values for name, values in found.items() if values is not None}
    for name, members in raw.sets.items():
        if np.any(dimension[members] == dimension.max()):
            inside = np.zeros(len(raw.kind), np.uint8)
            inside[members] = 1
            fields.setdefault(f"set:{name}", inside)
    return fields


def _boundary_groups(
    raw: RawMesh, dimension: Array, fields: Mapping[str, Array]
) -> tuple[BoundaryGroup, ...]:
    """Group the elements of lower dimension by named set, then by tag, then as they are."""
    groups: list[BoundaryGroup] = []
    top = int(dimension.max())
    low = dimension < top
    tag_of = {(dim, name): tag for (dim, tag), name in raw.names.items()}
    grouped = np.zeros(len(low), bool)
    for name, members in raw.sets.items():
        inside = np.zeros(len(low), bool)
        inside[members] = True
        inside &= low
        grouped |= inside
        for dim in np.unique(dimension[inside]).tolist():
            mask = inside & (dimension == dim)
            groups.append(_group(raw, mask, name, tag_of.get((dim, name), -1)))
    rest = low & ~grouped
    for dim in np.unique(dimension[rest]).tolist():
        groups += _groups_by_tag(raw, rest & (dimension == dim), dim, fields)
    return tuple(_with_distinct_names(groups))


def _groups_by_tag(
    raw: RawMesh, mask: BoolArray, dim: int, fields: Mapping[str, Array]
) -> list[BoundaryGroup]:
    """Group elements of one dimension by the most telling integer field of the file."""
    label = tag_label(fields)
    if label is None:
        return [_group(raw, mask, ("points", "lines", "surfaces")[dim], -1)]
    tags = fields[label]
    groups = []
    for tag in np.unique(tags[mask]).tolist():
        name = raw.names.get((dim, tag), f"{label}={tag}")
        groups.append(_group(raw, mask & (tags == tag), name, tag))
    return groups


def tag_label(fields: Mapping[str, Array]) -> str | None:
    """Return the most telling field of integers that tells groups apart, if there is one."""
    return next((name for name in TAG_FIELDS if _is_tag(fields.get(name))), None)


def _is_tag(values: Array | None) -> bool:
    """Tell whether a field can tell groups apart."""
    return values is not None and values.ndim == 1 and values.dtype.kind in "iu"


def _group(raw: RawMesh, mask: BoolArray, name: str, tag: int) -> BoundaryGroup:
    """Make one boundary group of the masked elements."""
    indptr, indices = select_rows(raw.indptr, raw.indices, mask)
    kind = raw.kind[mask].astype(KIND)
    return BoundaryGroup(name, int(tag), frozen(kind), frozen(indptr), frozen(indices))


def _with_distinct_names(groups: Sequence[BoundaryGroup]) -> list[BoundaryGroup]:
    """Append a number where a name comes twice (the same tag on lines and on surfaces)."""
    seen: dict[str, int] = {}
    distinct = []
    for group in groups:
        seen[group.name] = seen.get(group.name, 0) + 1
        again = seen[group.name]
        distinct.append(group if again == 1 else replace(group, name=f"{group.name} ({again})"))
    return distinct


def _numbers(values: Array, n_rows: int) -> Array | None:
    """Return a field as `as_numbers` does; None if it holds no numbers."""
    array = np.asarray(values)
    if array.dtype.kind not in "biuf" or len(array) != n_rows:
        return None
    return as_numbers(array)


def as_numbers(array: Array) -> Array:
    """Return a field in native byte order, one column flat."""
    if array.ndim > 1 and np.prod(array.shape[1:]) == 1:
        array = array.reshape(len(array))
    return array.astype(array.dtype.newbyteorder("="), copy=False)
