"""`sfcpart network` on ranks: its examples run, and its file serves the predictions of assess."""

from __future__ import annotations

import json
import re
import shlex

import pytest

from sfcpart.cli.network import HELP
from tests.mpi.harness import MpiJobError, run_command


def test_the_examples_of_its_help_run(tmp_path, root):
    (tmp_path / "meshes").symlink_to(root / "meshes")
    lines = re.findall(r"^  (.*sfcpart .*)$", HELP, re.M)
    assert len(lines) == 3
    for line in lines:
        before, _, words = line.partition("sfcpart ")
        arguments = shlex.split(words.replace("67108864", "65536"))  # to save time
        printed = run_command(arguments, 2 if "mpiexec" in before else 1, tmp_path)
        assert printed
        if "--json" in arguments:
            measured = json.loads(printed)["networks"]["on-node"]
            assert (measured["bytes"][0], measured["bytes"][-1]) == (8, 65536)
            assert measured["latency"] >= 0
            assert measured["bandwidth"] > 0
    network = json.loads((tmp_path / "network.json").read_text())
    assert (network["ranks"], network["hosts"]) == (2, 1)
    assert "(model, network network.json, on-node)" in " ".join(printed.split())


def test_one_rank_is_told_what_to_do(tmp_path):
    with pytest.raises(MpiJobError, match="ended with 2:\nsfcpart: error: one rank has nobody"):
        run_command(["network"], 1, tmp_path)


def test_a_file_that_cannot_be_written_is_said_once(tmp_path):
    with pytest.raises(MpiJobError) as caught:
        run_command(["network", "--largest", "64", "-o", "no/where.json"], 2, tmp_path)
    assert str(caught.value).count("no/where.json: cannot be written") == 1
    assert "ended with 4:" in str(caught.value)
