"""A run as a table: every split in every later frame, against splits measured one by one."""

from __future__ import annotations

import numpy as np
import pytest

import sfcpart
from sfcpart.errors import InputError, WeightError
from sfcpart.measure import StepModel
from sfcpart.mesh.shapes import lattice
from tools.series.front import front_series
from tools.series.spots import slow_series, spot_series

N_PARTS = 4


@pytest.fixture(scope="module")
def front():
    return list(front_series(4, n_levels=1, n_frames=6, steps=3))


def carried(frames, first, last, cell_part):
    """Give each cell the part of its parent, frame by frame."""
    for frame in frames[first + 1 : last + 1]:
        cell_part = cell_part[frame.parent]
    return cell_part


def test_every_entry_is_what_measuring_that_split_gives(front):
    model = StepModel.from_preset("gigabit-ethernet")
    resplit = sfcpart.ResplitCost(seconds=0.5, split_seconds=1e-3, cell_bytes=1000.0)
    table = sfcpart.replay(front, N_PARTS, step_model=model, resplit=resplit).timetable
    splits = [sfcpart.split(frame.mesh, N_PARTS).cell_part for frame in front]
    for i in range(len(front)):
        for k in range(i, len(front)):
            part = carried(front, i, k, splits[i])
            seen = sfcpart.assess(
                front[k].mesh, sfcpart.Partition.from_array(part, N_PARTS), step_model=model
            ).total
            assert table.slowest[i, k] == pytest.approx(seen["step_seconds"], rel=1e-12)
            assert table.imbalance[i, k] == pytest.approx(seen["imbalance"], abs=1e-12)
            if k > i:
                moved = sfcpart.Partition.from_array(part, N_PARTS).compare(
                    sfcpart.Partition.from_array(splits[k], N_PARTS)
                )
                assert table.moved_bytes[i, k] == 1000.0 * moved.n_moved_relabelled
                least = 0.5 + 1e-3 * front[k].n_cells / N_PARTS
                assert table.cost[i, k] >= least
                assert table.cost[i, k] <= least + 8 * 40e-6 + moved.n_moved * 1000 / 0.11e9
        assert np.isnan(table.slowest[i, :i]).all()
        assert np.isnan(table.cost[i, : i + 1]).all()
    assert table.steps.tolist() == [3] * 6
    assert table.n_cells.tolist() == [frame.n_cells for frame in front]


def test_weights_on_one_mesh_keep_their_unit():
    # Work that doubles everywhere takes twice as long, though no cell is dearer than another.
    mesh = lattice((8, 8)).to_mesh()
    frames = [sfcpart.Frame(mesh, weight=np.full(64, w)) for w in (1.0, 2.0)]
    quick = StepModel(network=StepModel().network, exchanges=0)
    table = sfcpart.replay(frames, 2, step_model=quick).timetable
    assert table.slowest[0, 1] == pytest.approx(2 * table.slowest[0, 0])
    assert table.moved_bytes[0, 1] == 0


def test_equal_cells_in_another_mesh_are_the_same_cells():
    frames = [sfcpart.Frame(lattice((8, 8)).to_mesh(), weight=np.arange(64) + k) for k in (1, 9)]
    one = [sfcpart.Frame(frames[0].mesh, weight=frame.weight) for frame in frames]
    tables = [sfcpart.replay(series, 2).timetable for series in (frames, one)]
    assert np.array_equal(tables[0].slowest, tables[1].slowest, equal_nan=True)


def test_without_parents_the_nearest_cell_counts(front):
    # Centres of refined cells lie nearest to that of the cube they were cut from.
    fine = [frame for frame in front if frame.n_cells > front[0].n_cells][:1]
    frames = [front[0], *fine]
    expected = sfcpart.replay(frames, N_PARTS).timetable
    bare = [front[0], sfcpart.Frame(fine[0].mesh, steps=3)]
    unknown = [front[0], sfcpart.Frame(fine[0].mesh, parent=np.full(fine[0].n_cells, -1), steps=3)]
    for series in (bare, unknown):
        found = sfcpart.replay(series, N_PARTS).timetable
        assert np.array_equal(found.slowest, expected.slowest, equal_nan=True)


def test_specified_weights_multiply_those_of_the_frames():
    mesh = lattice((8, 8)).to_mesh().with_cell_field("zone", np.arange(64) // 32)
    weight = np.where(np.arange(64) < 32, 4.0, 1.0)
    frames = [sfcpart.Frame(mesh, weight=weight)]
    even = sfcpart.replay(frames, 2, weights="zone:0=1,1=4").timetable
    assert even.imbalance[0, 0] == pytest.approx(0)
    plain = sfcpart.replay([sfcpart.Frame(mesh)], 2, weights="zone:0=1,1=4").timetable
    assert plain.n_frames == 1


def test_bare_centres_have_no_messages():
    mesh = sfcpart.Mesh.from_centers(np.stack([np.arange(8.0)] * 2, axis=1))
    frames = [sfcpart.Frame(mesh, weight=np.arange(8) + k + 1.0) for k in range(3)]
    table = sfcpart.replay(frames, 2).timetable
    assert table.slowest[0, 0] == pytest.approx(1e-6 * 8 * 21 / 36)


def test_slow_ranks_are_split_for():
    frames = list(slow_series(4, n_parts=4, n_frames=4))
    table = sfcpart.replay(frames, 4).timetable
    assert table.imbalance[0, 1] > 0.5
    assert table.imbalance[1, 1] < 0.05
    with pytest.raises(InputError, match="frame 1: wanted speeds in all frames or in none"):
        sfcpart.replay([frames[0], sfcpart.Frame(frames[0].mesh)], 4)
    with pytest.raises(WeightError, match=r"speeds of a frame have shape \(4,\)"):
        sfcpart.replay(frames, 5)


def test_progress_counts_frames():
    seen: list[int] = []
    sfcpart.replay(spot_series(4, n_frames=3), 2, progress=seen.append)
    assert seen == [1, 2, 3]


def test_frames_that_do_not_follow_are_refused(front):
    first, second = front[0], front[1]
    with pytest.raises(InputError, match="series is empty"):
        sfcpart.replay([], 2)
    beyond = np.array(second.parent)
    beyond[7] = first.n_cells
    with pytest.raises(
        InputError, match=f"frame 1: the parent of cell 7 is {first.n_cells}; wanted numbers from 0"
    ):
        sfcpart.replay([first, sfcpart.Frame(second.mesh, parent=beyond)], 2)
    with pytest.raises(InputError, match="method 'best' is unknown"):
        sfcpart.replay([first], 2, method="best")


@pytest.mark.parametrize(
    ("wrong", "error", "words"),
    [
        ({"weight": [1.0]}, WeightError, r"weights have shape \(1,\)"),
        ({"parent": [0.5, 1.0]}, InputError, "parents are float64"),
        ({"parent": [0]}, InputError, "wanted whole numbers, one a cell"),
        ({"steps": 0}, InputError, "a frame lasts 0 steps"),
        ({"steps": True}, InputError, "a frame lasts True steps"),
        ({"steps": 1.5}, InputError, "a frame lasts 1.5 steps"),
    ],
)
def test_what_makes_no_frame_is_refused(wrong, error, words):
    with pytest.raises(error, match=words):
        sfcpart.Frame(sfcpart.Mesh.from_centers(np.eye(2)), **wrong)


@pytest.mark.parametrize("name", ["seconds", "split_seconds", "cell_bytes"])
@pytest.mark.parametrize("value", [-1.0, float("nan"), float("inf")])
def test_costs_of_a_re_split_are_finite(name, value):
    with pytest.raises(InputError, match=f"{name} of a re-split is"):
        sfcpart.ResplitCost(**{name: value})
