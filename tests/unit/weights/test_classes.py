"""Counts of classes of cells, costs of classes as weights, and their file."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

import sfcpart
from sfcpart.errors import FileError, InputError, PartitionError, WeightError
from sfcpart.files.weights_file import read_costs
from sfcpart.weights import cell_weights
from sfcpart.weights.spec import costs_spec

POINTS = [[0, 0], [2, 0], [2, 1], [0, 1], [3, 0]]


@pytest.fixture
def mesh():
    return sfcpart.Mesh.from_arrays(
        POINTS,
        {"quad": [[0, 1, 2, 3]], "triangle": [[1, 4, 2]]},
        cell_fields={"zone": [7, 8], "name": ["bed", "sea"], "load": [0.5, 2.0], "bad": [-1, 2]},
    )


def counted(mesh, by):
    found = sfcpart.class_counts(mesh, [0, 1], by=by)
    return {name: values.tolist() for name, values in found.items()}


def test_every_sort_of_class_is_counted(mesh):
    assert counted(mesh, "kind") == {"triangle": [0, 1], "quad": [1, 0]}
    assert counted(mesh, ["cell", "face"]) == {"cell": [1, 1], "face": [4, 3]}
    assert counted(mesh, ["zone", "name"]) == {
        "zone:7": [1, 0],
        "zone:8": [0, 1],
        "name:bed": [1, 0],
        "name:sea": [0, 1],
    }
    assert counted(mesh, ["sum:load", "rank"]) == {"sum:load": [0.5, 2.0], "rank": [1, 1]}


def test_counts_weighed_by_costs_are_the_weights_of_the_parts(mesh):
    cost = {"quad": 3.0, "other": 1.0, "face": 0.5, "zone:8": 10.0, "zone:other": 0.0}
    cost |= {"sum:load": 2.0, "rank": 99.0}
    weight = cell_weights(
        mesh, costs_spec(cost, text="costs"), graph=lambda: sfcpart.cell_graph(mesh)
    )
    assert weight.tolist() == [3 + 2 + 0 + 1, 1 + 1.5 + 10 + 4]


@pytest.mark.parametrize(
    ("by", "error", "words"),
    [
        ("depth", WeightError, "there is no cell field 'depth'"),
        ("load", WeightError, "regions are whole numbers or text"),
        ("sum:bad", WeightError, "cell 0 has bad -1"),
        (["cell", "cell"], InputError, "'cell' is counted twice"),
    ],
)
def test_what_cannot_be_counted_is_refused(mesh, by, error, words):
    with pytest.raises(error, match=words):
        sfcpart.class_counts(mesh, [0, 1], by=by)


def test_fields_of_numbers_are_no_classes():
    many = np.arange(2000)
    mesh = sfcpart.Mesh.from_centers(np.stack([many, many], axis=1), cell_fields={"id": many})
    with pytest.raises(InputError, match="has 2000 values; wanted at most 1000 classes"):
        sfcpart.class_counts(mesh, many % 2, by="id")


def test_a_partition_of_another_mesh_is_refused(mesh):
    with pytest.raises(PartitionError, match="has 3 cells, the mesh 2"):
        sfcpart.class_counts(mesh, [0, 1, 1])


@pytest.mark.parametrize(
    ("cost", "words"),
    [
        ({"flame": 1.0}, "'flame' is no class of cells"),
        ({"tetra": -1.0}, "cost of 'tetra' is -1.0"),
        ({"tetra": float("nan")}, "cost of 'tetra' is nan"),
        ({"rank": 1.0}, "has no cost of any class of cells"),
        ({":4": 1.0}, "':4' is no class"),
    ],
)
def test_costs_that_weigh_no_cells_are_refused(cost, words):
    with pytest.raises(WeightError, match=words):
        costs_spec(cost, text="costs.json")


def test_a_file_of_costs_stands_wherever_weights_do(tmp_path):
    mesh = sfcpart.read_mesh("meshes/channel_mixed.vtu")
    fit = sfcpart.fit_weights([2.0, 4.0, 3.0], {"row:1": [10, 1, 5], "row:other": [0, 9, 5]})
    place = tmp_path / "costs.json"
    sfcpart.write_costs(place, fit)
    assert [file.name for file in tmp_path.iterdir()] == ["costs.json"]
    by_file = sfcpart.split(mesh, 5, weights=str(place))
    by_fit = sfcpart.split(mesh, 5, weights=fit.to_weights())
    assert np.array_equal(by_file.cell_part, by_fit.cell_part)
    product = sfcpart.assess(mesh, by_file, weights=[str(place), "work"]).part["weight"]
    expected = np.bincount(
        by_file.cell_part,
        np.where(mesh.cell_fields["row"] == 1, *fit.cost) * mesh.cell_fields["work"],
    )
    assert product == pytest.approx(expected)


def test_a_cell_field_goes_before_a_file():
    mesh = sfcpart.Mesh.from_centers(np.eye(2), cell_fields={"a.json": [1.0, 3.0]})
    part = sfcpart.assess(mesh, [0, 1], weights="a.json").part
    assert part["weight"].tolist() == [1, 3]


def test_speeds_travel_in_the_file(tmp_path):
    counts = [{"cell": [10, 20]}, {"cell": [20, 10]}]
    fit = sfcpart.fit_weights([[1.0, 4.0], [2.0, 2.0]], counts, speeds="fit")
    sfcpart.write_costs(tmp_path / "c.json", fit)
    assert read_costs(tmp_path / "c.json").speed == pytest.approx(tuple(fit.speed))


@pytest.mark.parametrize(
    ("content", "words"),
    [
        ("no json", "is no JSON"),
        ("[1]", "sfcpart_costs is None; wanted 1"),
        ({"sfcpart_costs": 2, "cost": {"cell": 1}}, "sfcpart_costs is 2; wanted 1"),
        ({"sfcpart_costs": 1}, "wanted an object of numbers as 'cost'"),
        ({"sfcpart_costs": 1, "cost": {"cell": True}}, "wanted an object of numbers"),
        ({"sfcpart_costs": 1, "cost": {"cell": 1}, "speed": 3}, "wanted a list of numbers"),
    ],
)
def test_files_that_hold_no_costs_are_refused(tmp_path, content, words):
    place = tmp_path / "c.json"
    place.write_text(content if isinstance(content, str) else json.dumps(content))
    with pytest.raises(FileError, match=words):
        read_costs(place)
    mesh = sfcpart.Mesh.from_centers(np.eye(2))
    with pytest.raises(FileError, match=words):
        sfcpart.split(mesh, 2, weights=str(place))


def test_files_of_costs_must_be_there_and_be_named_so(tmp_path):
    with pytest.raises(FileError, match="none.json: cannot be read"):
        read_costs(tmp_path / "none.json")
    fit = sfcpart.fit_weights([2.0, 4.0], {"cell": [10, 20]})
    with pytest.raises(FileError, match="must end in .json"):
        sfcpart.write_costs(tmp_path / "costs.txt", fit)
    with pytest.raises(FileError, match="cannot be written"):
        sfcpart.write_costs(tmp_path / "no" / "costs.json", fit)
    nothing = sfcpart.fit_weights([2.0, 2.0], {"cell": [0, 1], "rank": [1, 1]})
    with pytest.raises(WeightError, match="all fitted costs are 0"):
        sfcpart.write_costs(tmp_path / "costs.json", nothing)
    assert list(Path(tmp_path).iterdir()) == []
