"""The verdict in two sentences, for good splits and for such that no solver should start with."""

import numpy as np
import pytest

import sfcpart
from sfcpart.comparison import ComparedSplit, Comparison
from sfcpart.mesh.shapes import lattice
from sfcpart.report.verdict import judge, judge_comparison, listed


@pytest.fixture(scope="module")
def mesh():
    return lattice((8, 8)).to_mesh()


def test_an_even_split_is_said_to_be_even(mesh):
    first, second = judge(sfcpart.assess(mesh, sfcpart.split(mesh, 4)))
    assert first == ("The work is evenly shared: no part of 4 carries more than its fair share.")
    assert second.startswith(
        "It cuts 16 of 112 inner faces (14.3 %) and leaves every part in one piece;"
    )
    assert second.endswith("(model, network infiniband-edr).")


def test_an_uneven_split_is_said_to_be_uneven(mesh):
    parts = np.arange(64) >= 48
    first, _ = judge(sfcpart.assess(mesh, parts.astype(int)))
    assert first == (
        "The work is unevenly shared: the most loaded of 2 parts carries 50 % more than its fair "
        "share (no split can do better than 0 %)."
    )


def test_what_no_split_can_avoid_is_not_held_against_one(mesh):
    weights = np.ones(64)
    weights[0] = 1000.0
    first, _ = judge(sfcpart.assess(mesh, sfcpart.split(mesh, 4, weights=weights), weights=weights))
    assert first.startswith("The work is shared about as evenly as its cells allow:")


def test_faults_come_first(mesh):
    parts = sfcpart.Partition.from_array(np.arange(64) % 2, 4)
    first, second = judge(sfcpart.assess(mesh, parts, limit_weights=np.ones(64), limits=20.0))
    assert first.startswith(
        "Not fit to run: 2 parts are empty (2, 3) and the fullest part holds 160 % of its limit;"
    )
    assert "2 parts in more than one piece" in second


def test_without_faces_the_cut_is_not_known():
    mesh = sfcpart.Mesh.from_centers(np.arange(20.0).reshape(10, 2))
    _, second = judge(sfcpart.assess(mesh, sfcpart.split(mesh, 2)))
    assert second.startswith("What it cuts is not known")


def test_many_parts_are_cut_short():
    assert listed([1, 2]) == "1, 2"
    assert listed(list(range(12))) == "0, 1, 2, 3, 4, 5, 6, 7, 8, 9 and 2 more"


def test_the_way_that_finishes_first_is_named_with_its_price(mesh):
    first, second = judge_comparison(sfcpart.compare(mesh, 4, methods=["hilbert", "rows"]))
    assert first.startswith("Over 10,000 steps ")
    assert "faces" in second
    alone = judge_comparison(sfcpart.compare(mesh, 4, methods=["hilbert"]))
    assert alone[0] == "Over 10,000 steps hilbert is predicted to finish first."
    assert alone[1] == "It also cuts the fewest faces, 16."


def test_when_the_fewest_faces_are_cut_by_another_both_are_named(mesh):
    slow, quick = (
        ComparedSplit(
            name,
            partition=part,
            assessment=sfcpart.assess(mesh, part),
            split_seconds=took,
        )
        for name, part, took in (
            ("slow", sfcpart.split(mesh, 4), 1e6),
            ("quick", sfcpart.split(mesh, 4, method="rows"), 0.0),
        )
    )
    said = judge_comparison(Comparison((slow, quick), steps=10, graph_seconds=None))
    assert said[0] == "Over 10 steps quick is predicted to finish first, 100 % before slow."
    assert said[1] == "The fewest faces are cut by slow, 16; quick cuts 24."


def test_a_comparison_without_faces_or_without_any_split():
    mesh = sfcpart.Mesh.from_centers(np.arange(20.0).reshape(10, 2))
    said = judge_comparison(sfcpart.compare(mesh, 2, methods=["hilbert", "smoothed"]))
    assert said[0].startswith("hilbert is the most even, with an imbalance of 0 %")
    none = judge_comparison(sfcpart.compare(mesh, 2, methods=["smoothed"]))
    assert none[0] == "No method could split the mesh as asked."
