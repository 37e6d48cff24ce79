"""Specifications of weights: fields, tables, faces, and products of these.

The spelling, as on the command line (spaces around signs are allowed):

==============================  ==================================================================
`cost`                          the cell field "cost"
`2.5`                           the same weight for every cell
`tetra=1,hexahedron=2.5`        by kind of cell; `other=1` for kinds not listed
`zone:1=1,2=4,other=1`          by region: values of the whole-number (or text) cell field "zone"
`cell=1,face=0.25`              so much a cell, and so much for each of its faces
`cost * zone:1=1,2=4`           the product
`costs.json`                    a file of costs of classes, which add up (`costs_spec`)
==============================  ==================================================================

A field whose name holds one of `*=,` can stand alone, not in a product. A `:` in a name is allowed:
in `gmsh:physical:1=2` the field is "gmsh:physical".
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from math import isfinite

from sfcpart.errors import WeightError
from sfcpart.mesh.kinds import KINDS

__all__ = ["OTHER", "Term", "WeightSpec", "costs_spec", "parse_weights"]

OTHER = "other"
"""Stands in a table for whatever the table does not list."""


@dataclass(frozen=True)
class Term:
    """One factor: a field, a table (by kind, or by region of a field), faces, or a number.

    Exactly one of `number`, `table`, `addends` and a bare `field` is what counts; a table with a
    field is by region, one with the keys cell and face by faces, and else by kind. Addends are
    terms that are summed, each times a number.
    """

    field: str | None = None
    table: tuple[tuple[str, float], ...] = ()
    number: float | None = None
    addends: tuple[tuple[float, Term], ...] = ()

    @property
    def is_mix(self) -> bool:
        """Whether a table is so much a cell and so much a face."""
        names = {name for name, _ in self.table}
        return self.field is None and bool(names) and names <= {"cell", "face"}

    @property
    def counts_faces(self) -> bool:
        """Whether it, or one of its addends, is such a table."""
        return self.is_mix or any(inner.is_mix for _, inner in self.addends)


@dataclass(frozen=True)
class WeightSpec:
    """A parsed specification: a product of terms.

    Attributes
    ----------
    text : str
        As it was written.
    terms : tuple
    """

    text: str
    terms: tuple[Term, ...]

    @property
    def needs_graph(self) -> bool:
        """Whether faces are counted."""
        return any(term.counts_faces for term in self.terms)


def parse_weights(text: str) -> WeightSpec:
    """Read a specification of weights (the spelling is in the module's docstring).

    Parameters
    ----------
    text : str

    Returns
    -------
    WeightSpec

    Raises
    ------
    WeightError
        If the text is none; the message repeats the part that is wrong.

    Examples
    --------
    >>> len(parse_weights("cost * tetra=1, other=2.5").terms)
    2
    """
    return WeightSpec(text, tuple(_parse_term(piece, text) for piece in text.split("*")))


def costs_spec(cost: Mapping[str, float], *, text: str) -> WeightSpec:
    """Return the specification in which costs of classes add up for each cell.

    Parameters
    ----------
    cost : mapping of str to float
        By class (`sfcpart.weights.classes` has the spelling): a kind of cell, "cell", "face",
        "FIELD:VALUE", "sum:FIELD"; "other" for kinds and "FIELD:other" for values not listed.
        "rank", which no cell causes, is left out.
    text : str
        Where it comes from, for messages.

    Raises
    ------
    WeightError
        If a class is none of these, a cost is negative or not finite, or nothing is left.

    Examples
    --------
    >>> costs_spec({"tetra": 2.0, "face": 0.5}, text="costs.json").needs_graph
    True
    """
    kinds = {kind.name for kind in KINDS.values()} | {OTHER}
    tables: dict[tuple[str, str], dict[str, float]] = {}
    addends: list[tuple[float, Term]] = []
    for name, value in cost.items():
        if not (isfinite(value) and value >= 0):
            raise WeightError(f"{text}: the cost of {name!r} is {value}; wanted a number >= 0")
        field, colon, label = name.rpartition(":")
        if name in ("cell", "face"):
            tables.setdefault(("mix", ""), {})[name] = value
        elif name in kinds:
            tables.setdefault(("kind", ""), {})[name] = value
        elif colon and field == "sum":
            addends.append((value, Term(field=label)))
        elif colon and field and label:
            tables.setdefault(("region", field), {})[label] = value
        elif name != "rank":
            raise WeightError(
                f"{text}: {name!r} is no class of cells; wanted a kind (tetra), cell, face, "
                "FIELD:VALUE or sum:FIELD"
            )
    addends += [(1.0, Term(field or None, tuple(t.items()))) for (_, field), t in tables.items()]
    if not addends:
        raise WeightError(f"{text}: has no cost of any class of cells; wanted at least one")
    return WeightSpec(text, (Term(addends=tuple(addends)),))


def _parse_term(piece: str, text: str) -> Term:
    """Read one factor."""
    piece = piece.strip()
    if not piece:
        wanted = "a factor is missing beside '*'" if text.strip() else "wanted a field or a table"
        raise WeightError(f"weights {text!r}: {wanted}")
    if "=" not in piece:
        try:
            return Term(number=_number(piece, text))
        except WeightError:
            return Term(field=piece)
    head, _, _ = piece.partition("=")
    name, colon, _ = head.rpartition(":")
    entries = piece[len(name) + 1 :] if colon else piece
    table = dict(_entry(entry, text) for entry in entries.split(","))
    term = Term(field=name.strip() if colon else None, table=tuple(table.items()))
    if term.field == "":
        raise WeightError(f"weights {text!r}: a field is missing before ':'")
    if len(table) != entries.count(",") + 1:
        raise WeightError(f"weights {text!r}: a name is given twice in {piece!r}")
    if term.field is None and not term.is_mix:
        _check_kinds(term, text)
    return term


def _entry(entry: str, text: str) -> tuple[str, float]:
    """Read one `name=number`."""
    name, sign, value = (part.strip() for part in entry.partition("="))
    if not sign or not name:
        raise WeightError(f"weights {text!r}: {entry.strip()!r} is no NAME=NUMBER")
    return name, _number(value, text)


def _number(value: str, text: str) -> float:
    """Read a number."""
    try:
        return float(value)
    except ValueError:
        raise WeightError(f"weights {text!r}: {value!r} is no number") from None


def _check_kinds(term: Term, text: str) -> None:
    """Refuse tables whose names are no kinds of cells."""
    known = {kind.name for kind in KINDS.values()} | {OTHER}
    for name, _ in term.table:
        if name not in known:
            raise WeightError(
                f"weights {text!r}: {name!r} is no kind of cell (tetra, hexahedron, ...); write "
                f"FIELD:{name}=... for a value of a cell field, cell=..,face=.. for costs by face"
            )
