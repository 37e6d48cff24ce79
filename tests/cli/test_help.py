"""Help: complete, fast to load, and every example in it runs as written."""

from __future__ import annotations

import re
import shutil
import subprocess
import sys

import numpy as np
import pytest

from sfcpart.cli.exits import EXITS, code_of
from sfcpart.cli.verbs import VERBS
from tests.run_files import write_runs, write_times

LIGHT = ["numpy", "scipy", "numba", "meshio", "h5py", "matplotlib", "rich", "mpi4py", "sfcpart.api"]


def test_help_lists_every_verb_and_every_exit_code(sfcpart):
    code, out, err = sfcpart("--help")
    assert (code, err) == (0, "")
    for name, (_, text) in VERBS.items():
        assert re.search(rf"^  {name} +{re.escape(text[:20])}", out, re.M)
    for row in EXITS:
        assert re.search(rf"^ +{row.code}  {re.escape(row.meaning)}$", out, re.M)


def test_help_loads_no_heavy_library(process):
    code = (
        "import sys\nfrom sfcpart.cli.run import run\nrun(['--help'])\n"
        f"print([name for name in {LIGHT} if name in sys.modules])"
    )
    ended = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, timeout=60
    )
    assert ended.stdout.splitlines()[-1] == "[]"


@pytest.mark.parametrize("verb", VERBS)
def test_each_verb_explains_itself_with_examples(sfcpart, verb):
    code, out, err = sfcpart(f"{verb} --help")
    assert (code, err) == (0, "")
    assert f"sfcpart {verb}" in out
    assert "Examples:" in out
    assert max(map(len, out.splitlines())) <= 100


def _examples(verb: str) -> list[str]:
    from importlib import import_module

    text = import_module(VERBS[verb][0]).command.help
    return re.findall(r"^ +sfcpart (.+?)(?:  .*)?$", text, re.M)


@pytest.mark.parametrize("verb", [verb for verb in VERBS if verb not in ("completion", "network")])
def test_every_example_in_the_help_runs(sfcpart, verb):  # network's: tests/mpi/test_network.py
    examples = _examples(verb)
    assert len(examples) >= 2
    np.save("cell_part.npy", np.arange(2784) // 600)
    sfcpart("split meshes/channel_mixed.vtu -n 3 -o parts -q")
    if verb == "fit-weights":
        write_times()
    if verb == "replay":
        write_runs()
    for line in examples:
        if verb == "split" and "-o parts" in line:
            shutil.rmtree("parts", ignore_errors=True)
        code, out, err = sfcpart(line)
        assert (code, err) == (0, ""), line
        assert out


@pytest.mark.parametrize(
    ("shell", "word"), [("bash", "complete"), ("zsh", "compdef"), ("fish", "complete")]
)
def test_completion_scripts_are_of_their_shell(sfcpart, shell, word):
    if shell == "bash" and shutil.which("bash") is None:
        pytest.skip("click asks bash for its version")
    code, out, _ = sfcpart(f"completion {shell}")
    assert code == 0
    assert word in out
    assert "_SFCPART_COMPLETE" in out


def test_words_are_completed(process):
    asked = {"COMP_CWORD": "1", "_SFCPART_COMPLETE": "bash_complete"}
    ended = process(**asked, COMP_WORDS="sfcpart ins")
    assert ended.stdout.split() == ["plain,inspect"]
    asked["COMP_CWORD"] = "3"
    ended = process(**asked, COMP_WORDS="sfcpart split --method hil")
    assert ended.stdout.split() == ["plain,hilbert"]


def test_methods_and_networks_named_in_help_exist(sfcpart):
    from sfcpart.measure.step_model import NETWORKS
    from sfcpart.methods.registry import METHODS

    for verb in ("split", "compare"):
        out = "".join(sfcpart(f"{verb} --help").out.split())  # names may be broken at hyphens
        for name in (*METHODS, *NETWORKS):
            assert name in out


def test_version(sfcpart):
    from sfcpart import __version__

    assert sfcpart("--version") == (0, f"sfcpart, version {__version__}\n", "")


def test_every_error_class_has_a_code():
    from sfcpart import errors

    wanted = {
        "SfcpartError": 70,
        "InputError": 3,
        "MeshError": 3,
        "WeightError": 3,
        "PartitionError": 5,
        "FileError": 4,
        "InsufficientMemoryError": 6,
        "RankError": 7,
    }
    assert set(wanted) == set(errors.__all__)
    for name, code in wanted.items():
        assert code_of(getattr(errors, name)("x")) == code
    assert code_of(MemoryError()) == 6
    assert code_of(ZeroDivisionError()) == 70
    assert len({row.code for row in EXITS}) == len(EXITS)
