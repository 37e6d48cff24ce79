"""Comparisons: figures are those of `assess`, marks are right, refusals are rows."""

from __future__ import annotations

import json
from collections.abc import Callable
from types import MappingProxyType

import numpy as np
import pytest

import sfcpart
from sfcpart import comparison as module
from sfcpart.comparison import COMPARED_COLUMNS, Comparison
from sfcpart.dtypes import Int32Array
from sfcpart.errors import InputError, PartitionError, WeightError
from sfcpart.kernels._jit import COMPILED
from sfcpart.measure.columns import TOTAL_COLUMNS
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.shapes import jittered_tets, lattice
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS, Method
from sfcpart.partition import Partition
from tests.assertions import assert_partition


def _strict(value: object) -> object:
    return json.loads(json.dumps(value, allow_nan=False))


class _Quick(Method):
    """A method made here, without a home."""

    def __init__(self, name: str, split: Callable[[Problem], Int32Array], needs_graph: bool):
        super().__init__(name=name, home="", needs_graph=needs_graph, summary="for a test")
        object.__setattr__(self, "split", split)

    def run(self, problem: Problem) -> Int32Array:
        return self.split(problem)


def _quick(name: str, split, *, needs_graph: bool = False) -> Method:
    return _Quick(name, split, needs_graph)


@pytest.fixture
def with_methods(monkeypatch):
    """Give a function that replaces the table of methods."""

    def replace(*methods: Method) -> None:
        table = MappingProxyType({method.name: method for method in methods})
        monkeypatch.setattr(module, "METHODS", table)

    return replace


@pytest.mark.parametrize("method", METHODS)
def test_figures_are_those_of_assess(method):
    mesh = jittered_tets((5, 4, 3) if COMPILED else (3, 2, 2), seed=2).to_mesh()
    weights = np.random.default_rng(1).random(mesh.n_cells)
    load = {"weights": weights, "speeds": [1.0, 2.0, 1.0]}
    found = sfcpart.compare(mesh, 3, methods=[method], **load)
    (row,) = found.rows
    assert_partition(row.partition, mesh, 3, weights=weights)
    same = sfcpart.split(mesh, 3, method=method, **load)
    assert np.array_equal(row.partition.cell_part, same.cell_part)
    total = sfcpart.assess(mesh, same, **load).total
    figures = next(found.figures())
    assert {c.name: figures[c.name] for c in TOTAL_COLUMNS} == dict(total)
    assert figures["run_seconds"] == row.split_seconds + 10_000 * total["step_seconds"]
    assert (row.graph_seconds > 0) == METHODS[method].needs_graph
    assert row.split_seconds > row.graph_seconds


def test_best_figures_by_hand_and_ties():
    mesh = lattice((8, 8)).to_mesh()
    columns = np.arange(64) // 16
    blocks = (np.arange(64) // 8 // 4) * 2 + np.arange(64) % 8 // 4
    given = {"strips": columns, "blocks": blocks, "blocks again": (3 - blocks)}
    found = sfcpart.compare(mesh, 4, methods=[], given=given)
    best = found.best()
    # Four strips of a square of side 8 cut 3 x 8 edges, four squares 2 x 8.
    assert [row["cut_faces"] for row in found.figures()] == [24, 16, 16]
    assert best["cut_faces"] == [1, 2]
    assert best["imbalance"] == [0, 1, 2]
    assert best["smallest_interface"] == [0]  # more is better: 8 against 4
    assert best["neighbours_max"] == [0, 1, 2]
    assert "split_seconds" not in best  # given ones have none
    assert not {"n_cells", "weight", "least_cut_faces"} & set(best)  # no better end
    assert found.to_json_dict()["best"]["cut_faces"] == ["blocks", "blocks again"]


def test_a_figure_that_one_row_has_marks_nobody():
    mesh = lattice((4, 4)).to_mesh()
    assert sfcpart.compare(mesh, 2, methods=["hilbert"]).best() == {}


def test_json_is_strict_and_complete():
    mesh = jittered_tets((3, 3, 3)).to_mesh()
    found = sfcpart.compare(mesh, 2, methods=["hilbert"], given={"all in one": [0] * mesh.n_cells})
    told = _strict(found.to_json_dict())
    names = ["name", *(column.name for column in COMPARED_COLUMNS), "failure"]
    assert [list(row) for row in told["rows"]] == [names, names]
    empty = told["rows"][1]
    assert (empty["n_empty_parts"], empty["cut_faces"], empty["split_seconds"]) == (1, 0, None)
    assert empty["run_seconds"] == found.steps * empty["step_seconds"]


def test_not_a_number_becomes_null():
    row = module.ComparedSplit("x", split_seconds=float("nan"), peak_bytes=3)
    told = _strict(Comparison(rows=(row, row), steps=1, graph_seconds=None).to_json_dict())
    assert told["rows"][0]["split_seconds"] is None
    assert told["best"] == {"peak_bytes": ["x", "x"]}


def test_a_refusal_is_a_row_that_says_why(with_methods):
    def refuse(problem):
        raise PartitionError("seven parts are unlucky")

    with_methods(METHODS["rows"], _quick("picky", refuse))
    found = sfcpart.compare(lattice((4, 4)).to_mesh(), 2)
    assert [row.failure for row in found.rows] == ["", "seven parts are unlucky"]
    told = _strict(found.to_json_dict())["rows"][1]
    assert told["failure"] == "seven parts are unlucky"
    assert told["cut_faces"] is None
    assert found.rows[1].partition is None


def test_bare_centres_have_balance_but_no_cut():
    mesh = Mesh.from_centers(np.random.default_rng(3).random((40, 3)))
    found = sfcpart.compare(mesh, 4, methods=["hilbert", "smoothed"])
    curve, graph = found.rows
    assert "centres only" in graph.failure
    assert curve.assessment.total["imbalance"] == 0.0
    assert found.graph_seconds is None
    assert next(found.figures())["run_seconds"] is None


def test_a_method_is_charged_what_it_allocates(with_methods):
    size = 96 << 20

    def hungry(problem):
        return (np.ones(size, np.uint8)[: len(problem.centers)] - 1).astype(np.int32)

    with_methods(_quick("hungry", hungry), METHODS["rows"])
    hungry_row, plain = sfcpart.compare(lattice((4, 4)).to_mesh(), 1).rows
    if hungry_row.peak_bytes is None:
        pytest.skip("this system does not tell the memory of a process")
    assert 0.98 * size <= hungry_row.peak_bytes <= 1.1 * size
    assert plain.peak_bytes < size / 4


def test_the_time_of_the_graph_counts_even_if_it_was_there(with_methods):
    mesh = jittered_tets((6, 6, 6)).to_mesh()
    sfcpart.cell_graph(mesh)

    def first_half(problem):
        return (np.arange(len(problem.centers)) * 2 // len(problem.centers)).astype(np.int32)

    with_methods(_quick("a", first_half), _quick("b", first_half, needs_graph=True))
    found = sfcpart.compare(mesh, 2, repeat=3)
    a, b = found.rows
    assert found.graph_seconds > 0
    assert (a.graph_seconds, b.graph_seconds) == (0.0, found.graph_seconds)
    assert b.split_seconds >= found.graph_seconds


def test_cuts_moved_along_a_curve_are_charged_the_graph():
    mesh = lattice((8, 8)).to_mesh()
    plain, moved = (
        sfcpart.compare(mesh, 4, methods=["hilbert"], cuts=cuts) for cuts in ("balanced", "least")
    )
    assert plain.rows[0].graph_seconds == 0
    assert moved.rows[0].graph_seconds == moved.graph_seconds > 0


def test_given_partitions_keep_their_place_and_their_empty_parts():
    mesh = lattice((4, 4)).to_mesh()
    halves = np.arange(16) // 8
    given = {"an array": halves, "a partition": Partition.from_array(halves, 4)}
    found = sfcpart.compare(mesh, 4, methods=["rows"], given=given)
    assert [row.name for row in found.rows] == ["rows", "an array", "a partition"]
    assert [row["n_empty_parts"] for row in found.figures()] == [0, 2, 2]


MESH = lattice((4, 4)).to_mesh()


@pytest.mark.parametrize(
    ("wish", "error", "words"),
    [
        ({"methods": ["magic"]}, InputError, "wanted some of hilbert"),
        ({"methods": ["rows", "rows"]}, InputError, "named twice"),
        ({"given": {"rows": [0] * 16}}, InputError, "like a method"),
        ({"given": {"a": [0] * 15}}, InputError, "'a' has 15 cells, the mesh 16"),
        ({"given": {"a": [2] * 16}}, InputError, "'a' has 3 parts; the comparison is of 2"),
        ({"steps": 0}, InputError, "steps is 0"),
        ({"repeat": True}, InputError, "repeat is True"),
        ({"weights": [1.0]}, WeightError, "shape"),
        ({"tolerance": -1}, InputError, "tolerance"),
    ],
)
def test_malformed_requests_are_refused_before_anything_is_split(wish, error, words, with_methods):
    def never(problem):
        raise AssertionError("was run")

    with_methods(*(_quick(name, never) for name in METHODS))
    with pytest.raises(error, match=words):
        sfcpart.compare(MESH, 2, **wish)


def test_the_table_is_the_same_for_any_number_of_repeats():
    mesh = jittered_tets((4, 4, 4)).to_mesh()
    once, often = (
        sfcpart.compare(mesh, 3, methods=["hilbert", "smoothed"], repeat=repeat)
        for repeat in (1, 3)
    )
    for a, b in zip(once.rows, often.rows, strict=True):
        assert np.array_equal(a.partition.cell_part, b.partition.cell_part)
