"""The predicted step, worked out by hand."""

from __future__ import annotations

import numpy as np
import pytest

from sfcpart.errors import InputError
from sfcpart.measure import DEFAULT_NETWORK, LEAVES_OUT, NETWORKS, Network, PartPairs, StepModel

PAIRS = PartPairs(
    part=np.array([0, 1, 1, 2], np.int32),
    neighbour=np.array([1, 0, 2, 1], np.int32),
    faces=np.array([5, 5, 3, 3]),
    sent_cells=np.array([4, 5, 3, 2]),
    received_cells=np.array([5, 4, 2, 3]),
)
MODEL = StepModel(
    cell_seconds=1.0,
    bytes_per_halo_cell=10.0,
    exchanges=2.0,
    network=Network("by hand", latency=0.5, bandwidth=20.0),
)


def test_work_and_messages_by_hand():
    found = MODEL.predict(np.array([10.0, 6.0, 8.0]), PAIRS, speed=np.ones(3), n_cells=24)
    assert found.work.tolist() == pytest.approx([10, 6, 8])
    # 2 exchanges of latency 0.5 and max(sent, received) * 10 / 20 seconds
    assert found.exchange.tolist() == pytest.approx([2 * 3.0, 2 * (3.0 + 2.0), 2 * 2.0])
    assert found.total == pytest.approx(16)
    assert found.exchange_share == pytest.approx(6 / 16)
    assert found.speed_up == pytest.approx(24 / 16)
    assert found.efficiency == pytest.approx(0.5)


def test_fast_ranks_work_faster_and_the_unit_of_weight_does_not_matter():
    silent = StepModel(cell_seconds=1.0, exchanges=0.0)
    weight, speed = np.array([10.0, 20.0, 30.0]), np.array([1.0, 2.0, 3.0])
    found = silent.predict(weight, PAIRS, speed=speed, n_cells=60)
    assert found.work.tolist() == pytest.approx([20, 20, 20])
    assert found.efficiency == pytest.approx(1)
    again = silent.predict(weight * 7, PAIRS, speed=speed * 5, n_cells=60)
    assert again.work.tolist() == pytest.approx([20, 20, 20])


def test_presets_are_labelled_and_ordered():
    assert DEFAULT_NETWORK in NETWORKS
    for name, network in NETWORKS.items():
        assert network.name == name
        assert "from memory, order of magnitude" in network.source
        assert 0 < network.latency < 1e-3
        assert 1e8 < network.bandwidth < 1e11
    assert StepModel().network is NETWORKS[DEFAULT_NETWORK]
    assert len(LEAVES_OUT) >= 5


def test_own_numbers_replace_those_of_a_preset():
    model = StepModel.from_preset("gigabit-ethernet", latency=1e-5)
    assert model.network.latency == 1e-5
    assert model.network.bandwidth == NETWORKS["gigabit-ethernet"].bandwidth
    assert model.network.source == "given by the user"
    assert model.to_json_dict()["network"] == "gigabit-ethernet, changed"
    assert StepModel.from_preset(latency=1e-5, bandwidth=1e9).network.name == "own"


def test_unknown_network_lists_those_known():
    with pytest.raises(InputError, match=r"unknown network 'ether'.*gigabit-ethernet"):
        StepModel.from_preset("ether")


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("cell_seconds", 0.0),
        ("cell_seconds", float("nan")),
        ("bytes_per_halo_cell", -1.0),
        ("exchanges", float("inf")),
        ("latency", -1e-6),
        ("bandwidth", 0.0),
    ],
)
def test_numbers_that_make_no_time_are_refused(name, value):
    with pytest.raises(InputError, match=name):
        StepModel.from_preset(**{name: value})
