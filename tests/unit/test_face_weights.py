"""Face measures as integers: proportional, never 0, sums exact."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sfcpart import split
from sfcpart.errors import InputError, WeightError
from sfcpart.mesh.shapes import lattice
from sfcpart.weights import face_weights

measures = st.lists(st.floats(0, 1e300, allow_subnormal=False), min_size=1, max_size=30)


@given(values=measures)
def test_weights_are_in_proportion_and_their_sum_is_exact(values):
    measure = np.array(values)
    weight = face_weights(measure, by="measure")
    assert weight.min() >= 1
    assert sum(weight.tolist()) <= 2**53
    if measure.max() > 0:
        bits = min(20, 52 - len(values).bit_length())
        assert weight.max() >= 2 ** (bits - 1)
        share = measure / measure.max()
        assert np.all(np.abs(weight / weight.max() - share) <= 2.0 ** (2 - bits))


def test_counting_ignores_the_measure():
    assert face_weights(np.array([0.5, 7.0]), by="count").tolist() == [1, 1]
    assert face_weights(np.zeros(0), by="measure").tolist() == []
    assert face_weights(np.zeros(2), by="measure").tolist() == [1, 1]


@pytest.mark.parametrize("wrong", [np.nan, np.inf, -1.0])
def test_no_measure_is_named(wrong):
    with pytest.raises(WeightError, match="face entry 1"):
        face_weights(np.array([1.0, wrong]), by="measure")


def test_other_ways_to_weigh_faces_are_refused():
    with pytest.raises(InputError, match="count, measure"):
        split(lattice((4, 4)).to_mesh(), 2, face_weight="length")  # type: ignore[arg-type]
