"""Forecasts: the same numbers as splitting and measuring at each count, by another route."""

import json

import numpy as np
import pytest

import sfcpart
from sfcpart.errors import InputError, MeshError, PartitionError
from sfcpart.measure import StepModel
from sfcpart.mesh.shapes import jittered_tets, lattice
from sfcpart.scaling import FORECAST_COLUMNS, forecast, ladder


@pytest.fixture(scope="module")
def mesh():
    made = jittered_tets((6, 5, 4)).to_mesh()
    work = 1.0 + np.random.default_rng(3).integers(0, 4, made.n_cells)
    return made.with_cell_field("work", work)


@pytest.mark.parametrize("weights", [None, "work"])
def test_each_count_is_what_splitting_and_measuring_give(mesh, weights):
    model = StepModel.from_preset("gigabit-ethernet", exchanges=2)
    found = forecast(mesh, [1, 7, 30], weights=weights, step_model=model, memory_a_cell=10.0)
    for rung in found.rungs:
        parts = sfcpart.split(mesh, rung.n_parts, weights=weights)
        wanted = sfcpart.assess(mesh, parts, weights=weights, step_model=model)
        total, part = wanted.total, wanted.part
        for name in ("step_seconds", "speed_up", "efficiency", "exchange_share"):
            assert getattr(rung, name) == pytest.approx(total[name], rel=1e-12), name
        assert rung.imbalance == pytest.approx(total["imbalance"], abs=1e-12)
        assert rung.neighbours_max == total["neighbours_max"]
        assert rung.cells_max == part["cells"].max()
        assert rung.halo_share == pytest.approx(total["halo_cells"] / mesh.n_cells)
        assert rung.memory_bytes == 10.0 * (part["cells"] + part["halo_cells"]).max()


def test_weak_scaling_is_the_first_parts_as_a_mesh_of_their_own(mesh):
    found = forecast(mesh, [8], keep=0.01)
    parts = sfcpart.split(mesh, 8)
    alone = mesh.n_cells // 8 * found.step_model.cell_seconds
    assert [rung.n_parts for rung in found.weak] == [1, 2, 4, 8]
    for rung in found.weak[1:]:
        inside = np.flatnonzero(parts.cell_part < rung.n_parts)
        corners = mesh.indices.reshape(-1, 4)[inside]
        region = sfcpart.Mesh.from_arrays(mesh.points, {"tetra": corners})
        wanted = sfcpart.assess(region, parts.cell_part[inside])
        assert rung.step_seconds == pytest.approx(wanted.total["step_seconds"])
        assert rung.efficiency == pytest.approx(alone / rung.step_seconds, rel=0.02)
    assert found.weak[0].efficiency == 1.0


def test_on_a_lattice_the_forecast_follows_from_squares():
    # 32 x 32 squares in 4 and 16 squares along the Hilbert curve: each inner side is 16 or 8 faces.
    found = forecast(lattice((32, 32)).to_mesh(), [4, 16])
    model = found.step_model
    message = model.network.latency + 8 * model.bytes_per_halo_cell / model.network.bandwidth
    assert found.rungs[0].halo_share == 4 * 2 * 16 / 1024
    assert found.rungs[1].halo_share == 2 * 24 * 8 * 2 / 2 / 1024 * 1.0
    assert found.rungs[1].step_seconds == pytest.approx(64e-6 + 5 * 4 * message)


def test_the_largest_count_that_keeps_the_wish_is_named(mesh):
    counts = [1, 2, 4, 8, 16, 32]
    free = forecast(mesh, counts, step_model=StepModel(exchanges=0), keep=0.9)
    assert free.best == 32
    rungs = free.rungs
    assert [rung.n_parts for rung in rungs] == counts
    slow = forecast(mesh, counts, step_model=StepModel.from_preset(latency=1e-5), keep=0.7)
    keeping = [rung.n_parts for rung in slow.rungs if rung.efficiency >= 0.7]
    assert slow.best == max(keeping) < 32
    assert slow.cells_a_part == mesh.n_cells / slow.best
    none = forecast(mesh, [16, 32], step_model=StepModel.from_preset(latency=1.0))
    assert none.best is None
    assert none.cells_a_part == mesh.n_cells / 16


def test_counts_are_sorted_and_named_once_and_all_of_it_is_json(mesh):
    found = forecast(mesh, [4, 2, 4])
    told = json.loads(json.dumps(found.to_json_dict(), allow_nan=False))
    assert [row["n_parts"] for row in told["rungs"]] == [2, 4]
    assert list(told["rungs"][0]) != []
    assert {column.name for column in FORECAST_COLUMNS} == set(told["rungs"][0])
    assert told["step_model"]["leaves_out"]


def test_a_mesh_without_weight_at_first_parts_is_still_forecast():
    mesh = lattice((4, 4)).to_mesh()
    weights = np.zeros(16)
    weights[-1] = 1.0
    found = forecast(mesh, [2], weights=weights)
    assert found.rungs[0].imbalance == 1.0
    assert all(np.isfinite(rung.efficiency) for rung in found.weak)


@pytest.mark.parametrize(
    ("how", "error", "words"),
    [
        ({"n_parts": []}, InputError, "no count"),
        ({"n_parts": [0]}, InputError, "whole numbers, 1 or more"),
        ({"n_parts": [True]}, InputError, "whole numbers"),
        ({"n_parts": [10**6]}, PartitionError, "the mesh has"),
        ({"keep": 0.0}, InputError, "above 0"),
        ({"keep": float("nan")}, InputError, "above 0"),
        ({"memory_a_cell": -1.0}, InputError, "finite number >= 0"),
    ],
)
def test_what_cannot_be_forecast_is_refused(mesh, how, error, words):
    with pytest.raises(error, match=words):
        forecast(mesh, **{"n_parts": [2], **how})


def test_bare_centres_are_refused():
    with pytest.raises(MeshError, match="without faces"):
        forecast(sfcpart.Mesh.from_centers(np.zeros((4, 2))), [2])


def test_ladders():
    assert ladder(3, 3) == [3]
    assert ladder(1, 8) == [1, 2, 4, 8]
    assert ladder(1, 3, rungs=20) == [1, 2, 3]
    assert len(ladder(16, 4096, rungs=16)) == 16
    for first, last, rungs in ((0, 4, None), (5, 4, None), (1, 4, 0)):
        with pytest.raises(InputError):
            ladder(first, last, rungs=rungs)
