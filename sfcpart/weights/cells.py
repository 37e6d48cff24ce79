"""The weight of every cell from a specification (`sfcpart.weights.spec` has the spelling).

Cost: O(n) a term; `cell=..,face=..` needs the cell graph.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike

from sfcpart.dtypes import Array, FloatArray
from sfcpart.errors import WeightError
from sfcpart.mesh.kinds import KINDS
from sfcpart.mesh.mesh import Mesh
from sfcpart.weights.spec import OTHER, Term, WeightSpec, parse_weights

if TYPE_CHECKING:
    from sfcpart.graph import CellGraph

__all__ = ["cell_weights", "counts_faces"]


def cell_weights(
    mesh: Mesh,
    spec: str | WeightSpec | ArrayLike | Sequence[str | WeightSpec],
    *,
    graph: CellGraph | Callable[[], CellGraph] | None = None,
) -> Array:
    """Return the weight of every cell.

    Parameters
    ----------
    mesh : Mesh
    spec : str, WeightSpec, sequence of these, or (n_cells,) numbers
        A sequence of specifications is multiplied. Numbers are only checked for their shape.
    graph : CellGraph, or a function that returns one, optional
        Needed where faces are counted.

    Returns
    -------
    (n_cells,) float64, or the field's own type for a single field
        Not yet checked for sign (`quantise` does).

    Raises
    ------
    WeightError
        If a field, kind or region is missing (those present are listed), or a field has not one
        number a cell.

    Examples
    --------
    >>> mesh = Mesh.from_arrays(
    ...     [[0, 0], [2, 0], [2, 1], [0, 1], [3, 0]],
    ...     {"quad": [[0, 1, 2, 3]], "triangle": [[1, 4, 2]]},
    ...     cell_fields={"zone": [7, 8]},
    ... )
    >>> cell_weights(mesh, "quad=3, triangle=1 * zone:8=10, other=1").tolist()
    [3.0, 10.0]
    """
    if isinstance(spec, str) and spec in mesh.cell_fields:
        return field_values(mesh, spec)
    specs = [spec] if isinstance(spec, (str, WeightSpec)) else spec
    if not _all_texts(specs):
        return _given(specs, mesh.n_cells)
    product: Array | None = None
    for one in specs:  # type: ignore[union-attr]  # texts, as just checked
        factor = _evaluate(mesh, one, graph)  # type: ignore[arg-type]
        product = factor if product is None else product * factor
    assert product is not None
    return product


def counts_faces(
    spec: str | WeightSpec | ArrayLike | Sequence[str | WeightSpec], mesh: Mesh
) -> bool:
    """Tell whether a specification counts faces, so that it needs the cell graph.

    Parameters
    ----------
    spec : str, WeightSpec, sequence of these, or (n_cells,) numbers
    mesh : Mesh
        A text that names one of its fields is no more than that.

    Examples
    --------
    >>> mesh = Mesh.from_centers([[0.0, 0.5]])
    >>> counts_faces("cell=1,face=2", mesh), counts_faces("vertex=2", mesh)
    (True, False)
    """
    specs = [spec] if isinstance(spec, (str, WeightSpec)) else spec
    if not _all_texts(specs):
        return False
    texts: Sequence[str | WeightSpec] = specs  # type: ignore[assignment]  # as just checked
    return any(term.counts_faces for one in texts for term in _terms(one, mesh))


def _terms(spec: str | WeightSpec, mesh: Mesh) -> tuple[Term, ...]:
    """Return the factors of one specification, none of a field or of what is refused later."""
    if isinstance(spec, WeightSpec):
        return spec.terms
    if spec in mesh.cell_fields:
        return ()
    try:
        return parse_weights(spec).terms
    except WeightError:
        return ()


def _all_texts(specs: object) -> bool:
    """Tell a non-empty sequence of specifications from numbers."""
    return (
        isinstance(specs, Sequence)
        and len(specs) > 0
        and all(isinstance(one, (str, WeightSpec)) for one in specs)
    )


def _given(weights: object, n_cells: int) -> Array:
    """Return weights given as numbers."""
    array = np.asarray(weights)
    if array.shape != (n_cells,):
        raise WeightError(f"weights have shape {array.shape}; wanted one a cell, ({n_cells},)")
    return array


def _evaluate(
    mesh: Mesh, spec: str | WeightSpec, graph: CellGraph | Callable[[], CellGraph] | None
) -> Array:
    """Return the product of the terms of one specification."""
    if isinstance(spec, str):
        if spec in mesh.cell_fields:
            return field_values(mesh, spec)
        spec = parse_weights(spec)
    product = _term_weights(mesh, spec.terms[0], graph)
    for term in spec.terms[1:]:
        with np.errstate(over="ignore", invalid="ignore"):  # refused later, naming the cell
            product = product * np.asarray(_term_weights(mesh, term, graph), np.float64)
    return product


def _term_weights(
    mesh: Mesh, term: Term, graph: CellGraph | Callable[[], CellGraph] | None
) -> Array:
    """Return the weights one factor gives."""
    if term.number is not None:
        return np.full(mesh.n_cells, term.number)
    if term.addends:
        return _sum(mesh, term, graph)
    if term.is_mix:
        return _face_weights(dict(term.table), graph)
    if term.field is None:
        return _kind_weights(mesh, dict(term.table))
    if term.table:
        return _region_weights(mesh, term.field, dict(term.table))
    return field_values(mesh, term.field)


def _sum(mesh: Mesh, term: Term, graph: CellGraph | Callable[[], CellGraph] | None) -> FloatArray:
    """Return the weights that several terms add up to."""
    total = np.zeros(mesh.n_cells)
    for factor, inner in term.addends:
        total += factor * np.asarray(_term_weights(mesh, inner, graph), np.float64)
    return total


def field_values(mesh: Mesh, name: str, *, kinds: str = "biuf") -> Array:
    """Return a cell field with one number a cell."""
    if name not in mesh.cell_fields:
        known = ", ".join(sorted(map(repr, mesh.cell_fields))) or "none"
        raise WeightError(f"there is no cell field {name!r}; the mesh has {known}")
    array = np.asarray(mesh.cell_fields[name])
    if array.ndim == 2 and array.shape[1] == 1:
        array = array[:, 0]
    if array.ndim != 1 or array.dtype.kind not in kinds:
        raise WeightError(
            f"cell field {name!r} has shape {array.shape} and type {array.dtype}; "
            "wanted one number a cell"
        )
    return array


def _face_weights(
    table: Mapping[str, float], graph: CellGraph | Callable[[], CellGraph] | None
) -> FloatArray:
    """Return cost of the cell plus cost of each of its faces, inner and outer."""
    if graph is None:
        raise WeightError("weights by face need the cell graph")
    faces = graph() if callable(graph) else graph
    count = np.diff(faces.indptr) + faces.boundary_count
    return np.asarray(table.get("cell", 0.0) + table.get("face", 0.0) * count, np.float64)


def _kind_weights(mesh: Mesh, table: Mapping[str, float]) -> FloatArray:
    """Return the weight of each cell's kind."""
    by_code = np.full(256, table.get(OTHER, np.nan))
    for code, kind in KINDS.items():
        if kind.name in table:
            by_code[code] = table[kind.name]
    weight = by_code[mesh.kind]
    _refuse_missing(
        weight, table, [KINDS[code].name for code in np.unique(mesh.kind).tolist()], "kind of cell"
    )
    return np.asarray(weight)


def _region_weights(mesh: Mesh, name: str, table: Mapping[str, float]) -> FloatArray:
    """Return the weight of each cell's value in a field."""
    values, place = np.unique(field_values(mesh, name, kinds="biufUS"), return_inverse=True)
    labels = [region_label(value, name) for value in values]
    weight = np.array([table.get(label, table.get(OTHER, np.nan)) for label in labels])
    _refuse_missing(weight, table, labels, f"value of cell field {name!r}")
    return np.asarray(weight[place], np.float64)


def region_label(value: object, name: str) -> str:
    """Return a value of a region field as it is written in a table."""
    if isinstance(value, bytes):
        return value.decode(errors="replace")
    if isinstance(value, (float, np.floating)):
        if value != np.floor(value):
            raise WeightError(
                f"cell field {name!r} holds {value}; regions are whole numbers or text"
            )
        return str(int(value))
    return str(int(value)) if isinstance(value, (bool, np.bool_)) else str(value)


def _refuse_missing(
    weight: Array, table: Mapping[str, float], present: Sequence[str], what: str
) -> None:
    """Raise an error for kinds or regions that the table leaves out."""
    missing = [label for label in present if label not in table]
    if not missing or OTHER in table or not np.isnan(weight).any():
        return
    shown = ", ".join(missing[:8]) + (", ..." if len(missing) > 8 else "")
    raise WeightError(f"no weight for {what} {shown}; add it, or other=NUMBER for all the rest")
