"""Figures as CSV and JSON, labels as .npy."""

from __future__ import annotations

import csv
import json
from pathlib import Path

import numpy as np
import pytest

from sfcpart.errors import FileError, InputError
from sfcpart.files.parts.tables import json_text, write_cell_part, write_part_table, write_summary
from sfcpart.partition import Partition


def test_one_row_a_part(tmp_path):
    columns = {"cells": np.array([3, 4]), "surface": np.array([0.1, np.nan]), "note": ["a", 'b"']}
    write_part_table(tmp_path / "parts.csv", columns)
    with (tmp_path / "parts.csv").open(newline="") as file:
        rows = list(csv.DictReader(file))
    assert rows == [
        {"part": "0", "cells": "3", "surface": "0.1", "note": "a"},
        {"part": "1", "cells": "4", "surface": "", "note": 'b"'},
    ]
    assert b"\r" not in (tmp_path / "parts.csv").read_bytes()


def test_floats_come_back_exactly(tmp_path):
    values = np.random.default_rng(1).random(20) / 3
    write_part_table(tmp_path / "parts.csv", {"x": values})
    with (tmp_path / "parts.csv").open(newline="") as file:
        assert [float(row["x"]) for row in csv.DictReader(file)] == values.tolist()


def test_columns_of_different_length_are_refused(tmp_path):
    with pytest.raises(InputError, match=r"'a': 2.*'b': 3"):
        write_part_table(tmp_path / "parts.csv", {"a": [1, 2], "b": [1, 2, 3]})


def test_json_is_valid_and_keeps_its_order(tmp_path):
    summary = {
        "zeta": np.float32(0.5),
        "alpha": [np.nan, np.inf, -np.inf, 1.5],
        "parts": {3: np.bool_(True), "path": Path("a") / "b"},
        "text": "ä",
        "none": None,
        "names": frozenset({"x"}),
    }
    write_summary(tmp_path / "summary.json", summary)

    def refuse(text):
        raise AssertionError(text)

    read = json.loads((tmp_path / "summary.json").read_text("utf-8"), parse_constant=refuse)
    assert list(read) == ["zeta", "alpha", "parts", "text", "none", "names"]
    assert read["alpha"] == [None, None, None, 1.5]
    assert read["parts"] == {"3": True, "path": str(Path("a") / "b")}


def test_values_without_a_form_in_json_are_named():
    with pytest.raises(InputError, match="a complex has no form"):
        json_text({"a": 1j})


def test_labels_in_file_order(tmp_path):
    write_cell_part(tmp_path / "cell_part.npy", Partition.from_array([2, 0, 1]))
    labels = np.load(tmp_path / "cell_part.npy", allow_pickle=False)
    assert labels.dtype == np.int32
    assert labels.tolist() == [2, 0, 1]


def test_places_that_cannot_be_written(tmp_path):
    place = tmp_path / "none" / "file"
    for call in (
        lambda: write_part_table(place, {"a": [1]}),
        lambda: write_summary(place, {}),
        lambda: write_cell_part(place, Partition.from_array([0])),
    ):
        with pytest.raises(FileError, match="cannot be written: No such file"):
            call()


@pytest.mark.skipif(not Path("/dev/full").exists(), reason="no /dev/full here")
def test_a_full_disk():
    with pytest.raises(FileError, match="No space left"):
        write_summary("/dev/full", {"a": 1})
    with pytest.raises(FileError, match="No space left"):
        write_part_table("/dev/full", {"a": np.arange(10)})
