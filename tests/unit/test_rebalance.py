"""The verb `rebalance` and what it weighs."""

from __future__ import annotations

import json

import numpy as np
import pytest

import sfcpart
from sfcpart.errors import InputError, PartitionError
from sfcpart.measure import StepModel
from sfcpart.mesh.refined import refined_box
from sfcpart.mesh.shapes import lattice
from sfcpart.resplit.choose import Trial, best_trial
from tests.assertions import assert_partition

WAYS = ["auto", "shift", "smooth", "scratch"]


@pytest.fixture(scope="module")
def box():
    """Give a box of 512 cells, its split, and work that grew on one side."""
    mesh = lattice((8, 8, 8)).to_mesh()
    return mesh, sfcpart.split(mesh, 8), np.where(mesh.centers[:, 0] < 4, 1.0, 3.0)


@pytest.mark.parametrize("way", WAYS)
def test_every_way_balances_and_is_weighed_against_keeping_the_old_split(box, way):
    mesh, old, work = box
    new = sfcpart.rebalance(mesh, old, weights=work, way=way, tolerance=0.1, steps=10**9)
    assert_partition(new.partition, mesh, 8, weights=work)
    assert new.after.total["imbalance"] <= 0.1 + 1e-9
    assert new.before.total["imbalance"] == pytest.approx(0.5)
    assert new.verdict.pays and new.verdict.text.startswith("re-split now: pays back after ")
    assert new.migration.times_least >= 1.0
    moved = new.partition.cell_part != old.cell_part
    assert new.migration.moved_weight == work[moved].sum()
    told = json.loads(json.dumps(new.to_json_dict()))
    assert told["pays"] and told["way"] == new.way


def test_a_dear_move_keeps_cells_at_home(box):
    mesh, old, work = box
    cheap, dear = (
        sfcpart.rebalance(mesh, old, weights=work, way="smooth", steps=1, cell_bytes=price)
        for price in (0.0, 1e6)
    )
    assert dear.migration.moved_weight <= cheap.migration.moved_weight
    model = StepModel(exchanges=0.0)
    none = sfcpart.rebalance(mesh, old, weights=work, way="smooth", step_model=model)
    assert none.migration.moved_weight <= cheap.migration.moved_weight


def test_auto_takes_the_least_predicted_time_of_steps_and_moving(box):
    mesh, old, work = box
    new = sfcpart.rebalance(mesh, old, weights=work, steps=50)
    done = {trial.name: trial.run_seconds for trial in new.trials}
    assert list(done) == ["shift", "smooth", "scratch"]
    assert done[new.way] == min(done.values())
    assert done[new.way] == 50 * new.verdict.step_after + new.migration.seconds


def test_ways_that_refuse_say_why_and_leave_the_others(box):
    mesh, old, work = box
    new = sfcpart.rebalance(mesh, old, n_parts=4, weights=work)
    assert "cannot be smoothed" in {trial.name: trial.failure for trial in new.trials}["smooth"]
    assert new.before is None and new.partition.n_parts == 4
    assert new.verdict.text == "re-split now: the old split cannot be kept"
    with pytest.raises(PartitionError, match="one: this; two: that"):
        best_trial([Trial("one", failure="this"), Trial("two", failure="that")])


def test_a_split_that_breaks_a_limit_cannot_be_kept(box):
    mesh, old, work = box
    new = sfcpart.rebalance(
        mesh, old, weights=work, way="shift", limits=150.0, limit_weights=work, tolerance=0.2
    )
    assert new.before.total["limit_share"] > 1 and new.after.total["limit_share"] <= 1
    assert new.verdict.text == "re-split now: the old split cannot be kept"


def test_smoothing_that_breaks_a_limit_is_refused(box):
    mesh, old, work = box
    memory = np.where(mesh.centers[:, 0] < 4, 3.0, 1.0)
    with pytest.raises(PartitionError, match="smoothing breaks the limit"):
        sfcpart.rebalance(mesh, old, weights=work, way="smooth", limit_weights=memory, limits=192.0)


def test_bare_centres_have_work_alone_to_go_by():
    mesh = sfcpart.Mesh.from_centers([[float(x), 0.0] for x in range(16)])
    work = np.where(np.arange(16) < 8, 1.0, 3.0)
    new = sfcpart.rebalance(mesh, np.arange(16) // 8, weights=work)
    assert [trial.name for trial in new.trials] == ["shift", "scratch"]
    assert new.verdict.step_before == pytest.approx(8e-6 * 1.5)
    assert new.verdict.step_after < new.verdict.step_before


@pytest.mark.parametrize("keep", ["total", "busiest"])
def test_nested_parts_stay_on_their_node(box, keep):
    mesh, old, work = box
    new = sfcpart.rebalance(mesh, old, weights=work, way="scratch", levels=(2, 4), keep=keep)
    node = new.partition.cell_part // 4
    plain = sfcpart.split(mesh, 8, weights=work, levels=(2, 4)).cell_part // 4
    assert np.array_equal(node, plain) or np.array_equal(1 - node, plain)


def test_families_of_a_refined_box_stay_together():
    coarse, fine = (refined_box(4, n_levels=k).to_mesh() for k in (0, 1))
    old = sfcpart.split(coarse, 4)
    level = fine.cell_fields["level"]
    corner = np.floor(fine.centers).astype(int)
    key = {tuple(row): k for k, row in enumerate(np.floor(coarse.centers).astype(int).tolist())}
    parent = np.array([key[tuple(row)] for row in corner.tolist()])
    mesh = fine.with_cell_field("parent", parent)
    for way in ("shift", "smooth", "scratch"):
        new = sfcpart.rebalance(
            mesh, old, parent="parent", together="parent", way=way, tolerance=0.3
        )
        part = new.partition.cell_part
        assert all(len(set(part[parent == p])) == 1 for p in np.unique(parent[level == 1]))
    assert np.array_equal(new.home.cell_part, old.cell_part[parent])
    near = sfcpart.rebalance(mesh, old, old_mesh=coarse, way="shift", tolerance=0.3)
    assert np.array_equal(near.home.cell_part, new.home.cell_part)
    back = sfcpart.rebalance(coarse, new.partition, merged_into=parent, way="shift", tolerance=0.3)
    assert np.array_equal(back.home.cell_part[parent], new.partition.cell_part)


@pytest.mark.parametrize(
    ("wish", "text"),
    [
        ({"way": "best"}, "way 'best' is unknown; wanted one of auto, shift, smooth, scratch"),
        ({"method": "best"}, "method 'best' is unknown"),
        ({"keep": "most"}, "keep is 'most'; wanted total or busiest"),
        ({"steps": 0}, "steps is 0; wanted a whole number"),
        ({"steps": True}, "steps is True; wanted a whole number"),
        ({"cell_bytes": -1.0, "way": "shift"}, "cell_bytes is -1.0"),
        ({"parent": "nothing"}, "there is no cell field 'nothing'; the mesh has none"),
    ],
)
def test_wishes_that_mean_nothing_are_refused(box, wish, text):
    mesh, old, _ = box
    with pytest.raises(InputError, match=text):
        sfcpart.rebalance(mesh, old.cell_part, **wish)


def test_the_verb_is_not_hidden_by_the_room_of_its_name():
    from sfcpart.resplit import caps

    assert callable(sfcpart.rebalance) and caps.part_caps is not None
