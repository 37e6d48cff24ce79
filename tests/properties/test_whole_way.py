"""The public way from a mesh to what a solver loads, on meshes that often break programs.

Every method of the registry takes part, so a new one is tested here as soon as it is listed.
"""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

import sfcpart
from sfcpart.api import graph_of
from sfcpart.errors import WeightError
from sfcpart.methods.registry import METHODS
from tests.assertions import assert_partition, part_weights
from tests.strategies import group_numbers, part_counts, small_meshes, weights

NEEDS_GRAPH = [name for name, method in METHODS.items() if method.needs_graph]


@pytest.fixture(params=METHODS)
def method(request):
    """Give each method by name."""
    return request.param


def test_degenerate_meshes_are_split(degenerate, method):
    if graph_of(degenerate.mesh) is None and method in NEEDS_GRAPH:
        pytest.skip("a mesh known by its centres has no cell graph")
    if degenerate.weights is not None and not degenerate.weights.any():
        with pytest.raises(WeightError, match="zero"):
            sfcpart.split(degenerate.mesh, degenerate.n_parts, weights=degenerate.weights)
        return
    partition = sfcpart.split(
        degenerate.mesh, degenerate.n_parts, method=method, weights=degenerate.weights
    )
    assert_partition(partition, degenerate.mesh, degenerate.n_parts, weights=degenerate.weights)


def test_degenerate_meshes_are_measured(degenerate):
    partition = sfcpart.split(degenerate.mesh, degenerate.n_parts)
    assessment = sfcpart.assess(degenerate.mesh, partition)
    np.testing.assert_array_equal(assessment.part["cells"], partition.part_size())
    figures = json.loads(json.dumps(assessment.to_json_dict(), allow_nan=False))
    assert figures["total"]["n_cells"] == degenerate.mesh.n_cells


def test_degenerate_meshes_are_written_and_loaded(degenerate, tmp_path):
    if degenerate.mesh.points is None:
        pytest.skip("a mesh without points has no cells to draw")
    mesh = degenerate.mesh
    partition = sfcpart.split(mesh, degenerate.n_parts)
    folder = sfcpart.write_split(tmp_path / "parts", mesh, partition)
    loaded = [sfcpart.read_part(folder, part) for part in range(degenerate.n_parts)]
    owned = [np.asarray(one.cell_gid[: one.n_owned]) for one in loaded]
    for part, cells in enumerate(owned):
        np.testing.assert_array_equal(partition.cell_part[cells], part)
    assert sorted(np.concatenate(owned).tolist()) == list(range(mesh.n_cells))


@st.composite
def jobs(draw):
    """Draw a small mesh, a number of parts and weights."""
    mesh = draw(small_meshes())
    weight = draw(weights(mesh.n_cells).filter(np.any))  # all zeros are refused
    return mesh, draw(part_counts(mesh.n_cells)), weight


@pytest.mark.parametrize("name", METHODS)
@given(job=jobs())
def test_any_small_mesh_is_split_the_same_each_time(name, job):
    mesh, n_parts, weight = job
    partition = sfcpart.split(mesh, n_parts, method=name, weights=weight)
    assert_partition(partition, mesh, n_parts, weights=weight)
    assert sfcpart.split(mesh, n_parts, method=name, weights=weight).equals(partition)


@pytest.mark.parametrize("name", METHODS)
@given(mesh=small_meshes(), data=st.data())
def test_groups_stay_together(name, mesh, data):
    group = data.draw(group_numbers(mesh.n_cells))
    n_items = int(np.sum(group < 0)) + len(np.unique(group[group >= 0]))
    n_parts = data.draw(part_counts(n_items))
    partition = sfcpart.split(mesh, n_parts, method=name, together=group)
    assert_partition(partition, mesh, n_parts, groups=group)


@given(job=jobs())
def test_the_least_bottleneck_is_no_worse_with_one_part_more(job):
    mesh, n_parts, weight = job
    if n_parts == mesh.n_cells or weight.dtype.kind == "f":
        return
    heaviest = [
        part_weights(sfcpart.split(mesh, count, weights=weight).cell_part, count, weight).max()
        for count in (n_parts, n_parts + 1)
    ]
    assert heaviest[1] <= heaviest[0]
