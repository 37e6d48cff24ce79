"""The room for solvers on MPI ranks: as on threads, and in the program that the manual shows."""

from __future__ import annotations

import json
import re

import numpy as np
import pytest

from sfcpart.comm import run_ranks
from sfcpart.manual import read_page
from tests.mpi.harness import run_job, run_script
from tests.mpi.parallel_job import act

SIZES = [1, 2, 3, 4]


@pytest.mark.parametrize("size", SIZES)
def test_processes_see_what_threads_see(tmp_path, size):
    run_job("tests.mpi.parallel_job", size, tmp_path)
    seen = [json.loads((tmp_path / f"rank{r}.json").read_text()) for r in range(size)]
    wanted = run_ranks(size, lambda comm: act(comm, comm.rank, comm.size))
    assert [rank["lines"] for rank in seen] == wanted
    for rank in seen:
        assert rank["memory"]["right"]
        assert rank["memory"]["scratch"] <= rank["memory"]["bound"]


def example() -> str:
    """Return the program of the manual."""
    programs = re.findall(r"^```python\n(.*?)^```$", read_page("in_a_solver"), re.M | re.S)
    assert len(programs) == 1
    return programs[0]


def number(name: str) -> float:
    """Return a constant of the program."""
    line = re.search(r"^NX, NY, STEPS, RATE = (.*)$", example(), re.M)
    assert line is not None
    return dict(zip(["NX", "NY", "STEPS", "RATE"], eval(line[1]), strict=True))[name]


def diffused() -> np.ndarray:
    """Return the salt of the program after its steps, on whole rows and columns at once."""
    salt = np.zeros((int(number("NY")), int(number("NX"))))
    salt[:, :6] = 35.0
    for _ in range(int(number("STEPS"))):
        change = np.zeros_like(salt)
        change[1:] += salt[:-1] - salt[1:]
        change[:, 1:] += salt[:, :-1] - salt[:, 1:]
        change[:, :-1] += salt[:, 1:] - salt[:, :-1]
        change[:-1] += salt[1:] - salt[:-1]
        salt += number("RATE") * change
    return salt.ravel()


@pytest.mark.parametrize("size", SIZES)
def test_the_program_of_the_manual_gives_the_same_bits_on_any_ranks(tmp_path, size):
    script = tmp_path / "channel.py"
    script.write_text(example())
    printed = run_script(script, size)
    salt = np.full(int(number("NX") * number("NY")), np.nan)
    for rank in range(size):
        with np.load(tmp_path / f"salt_{rank}.npz") as saved:
            assert np.isnan(salt[saved["gid"]]).all()  # no cell is owned twice
            salt[saved["gid"]] = saved["salt"]
    wanted = diffused()
    assert salt.tobytes() == wanted.tobytes()
    assert wanted.sum() == pytest.approx(35.0 * 6 * number("NY"), rel=1e-12)
    work = [float(found) for found in re.findall(r"cells of work ([\d.]+)", printed)]
    assert len(work) == size
    assert max(work) <= 1.05 * sum(work) / size  # the second split followed the salt


@pytest.mark.parametrize("size", [1, 3])
def test_the_script_of_the_readme_runs_on_any_ranks(tmp_path, root, size):
    scripts = re.findall(
        r"^```python\n(# salt\.py.*?)^```$", (root / "README.md").read_text(), re.M | re.S
    )
    assert len(scripts) == 1
    (tmp_path / "salt.py").write_text(scripts[0])
    printed = run_script(tmp_path / "salt.py", size)
    found = re.fullmatch(r"(\d+) ranks, (\d+) cells on rank 0, salt ([\d.]+)\s*", printed)
    assert found is not None, printed
    assert (int(found[1]), float(found[3])) == (size, pytest.approx(35.0 * 1000, rel=1e-9))
    assert int(found[2]) == pytest.approx(10_000 / size, abs=1)
