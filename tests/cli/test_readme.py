"""Whatever the README shows can be typed as it stands, and its tables are those of the code.

The two commands of its beginning are run by `.ci/run` on a clean machine.
"""

from __future__ import annotations

import re
from pathlib import Path

import numpy as np
import pytest

from sfcpart.cli.exits import EXITS
from sfcpart.cli.verbs import VERBS

README = (Path(__file__).resolve().parents[2] / "README.md").read_text()
MANUAL = Path(__file__).resolve().parents[2] / "sfcpart" / "manual"


def blocks(language: str) -> list[str]:
    """Return the examples of one language."""
    return re.findall(rf"^```{language}\n(.*?)^```$", README, re.M | re.S)


def command_lines() -> list[str]:
    """Return the command lines of the shell examples, without comments."""
    lines = [line.partition("#")[0].strip() for block in blocks("sh") for line in block.split("\n")]
    return [line for line in lines if line]


def test_the_two_commands_of_a_fresh_machine_come_first():
    first = README.index("```sh")
    assert command_lines()[:2] == [
        "python3 -m pip install . && sfcpart demo",
        "python3 -m pip install '.[test]' && python3 -m pytest",
    ]
    assert README[:first].count("\n\n") <= 2  # one title, one paragraph


def test_every_command_runs_after_the_python_example_in_one_folder(sfcpart):
    exec(compile(blocks("python")[0], "README.md", "exec"), {})
    lines = [line for line in command_lines() if line.startswith("sfcpart ")]
    assert len(lines) >= 6
    for line in lines:
        code, out, err = sfcpart(line.removeprefix("sfcpart "))
        assert (code, err) == (0, ""), line
        assert out, line


def test_every_other_command_is_known():
    known = ("sfcpart ", "python3 -m pip install", "mpiexec ")
    assert [line for line in command_lines() if not line.startswith(known)] == []


@pytest.mark.parametrize("number", range(len(blocks("python"))))
def test_every_python_example_runs(sfcpart, capsys, number):
    text = blocks("python")[number]
    if "comm" in text:
        pytest.skip("needs ranks: shown as a whole in the manual and tested there")
    exec(compile(text, "README.md", "exec"), {})
    if "print(" in text:
        assert capsys.readouterr().out


def test_the_example_is_ten_lines_at_most_and_the_parts_add_up(sfcpart):
    first = blocks("python")[0]
    assert len([line for line in first.split("\n") if line.strip()]) <= 10
    names: dict = {}
    exec(compile(first, "README.md", "exec"), names)
    part, partition = names["part"], names["partition"]
    assert part.n_owned == np.sum(partition.cell_part == 3)


def test_exit_codes_are_those_of_the_table():
    rows = re.findall(r"^\| (\d+) \| (.+) \|$", README, re.M)
    assert rows == [(str(row.code), row.meaning) for row in EXITS]


def test_every_verb_is_mentioned_and_no_other():
    told = set(
        re.findall(r"\bsfcpart ([a-z][a-z-]*)\b", " ".join(re.findall(r"`[^`\n]+`", README)))
    )
    told |= {line.split()[1] for line in command_lines() if line.startswith("sfcpart ")}
    told |= {"demo"}  # of the first command
    assert told == set(VERBS)


def test_pictures_and_meshes_named_are_there():
    root = Path(__file__).resolve().parents[2]
    named = re.findall(r"\((\S+\.png)\)|(meshes/\w+\.\w+)", README)
    assert named
    for pair in named:
        assert (root / (pair[0] or pair[1])).exists()
