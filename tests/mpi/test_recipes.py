"""The recipe for splitting again inside a solver, on MPI ranks."""

from __future__ import annotations

import re

import pytest

from sfcpart.manual import read_page
from tests.mpi.harness import run_script


@pytest.mark.parametrize("size", [1, 3])
def test_the_recipe_for_a_running_solver_keeps_every_cell(tmp_path, size):
    programs = re.findall(r"^```python\n(.*?)^```$", read_page("recipes"), re.M | re.S)
    script = tmp_path / "front.py"
    script.write_text(programs[-1])
    printed = run_script(script, size)
    found = re.search(r"(\d+) cells on (\d+) ranks, split again (\d+) times", printed)
    assert found is not None, printed
    assert (int(found[1]), int(found[2])) == (2400, size)
    assert (int(found[3]) > 0) == (size > 1)
