"""The command as a user types it: in this process for speed, or as a real one."""

from __future__ import annotations

import os
import shlex
import subprocess
import sys
from pathlib import Path
from typing import NamedTuple

import pytest

from sfcpart.kernels._jit import COMPILED
from sfcpart.methods.registry import METHODS

ROOT = Path(__file__).resolve().parents[2]
MESHES = ROOT / "meshes"


class Ended(NamedTuple):
    """How a command ended."""

    code: int
    out: str
    err: str


@pytest.fixture
def meshes() -> Path:
    """Give the folder of sample meshes."""
    return MESHES


@pytest.fixture
def sfcpart(capsys, tmp_path, monkeypatch):
    """Give a function that runs a command line in a fresh folder beside a link to `meshes`."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "meshes").symlink_to(MESHES)
    monkeypatch.setenv("SFCPART_THREADS", os.environ.get("SFCPART_THREADS", "2"))

    if not COMPILED:  # plain Python visits cells and pixels one by one: give it fewer
        for name, value in {"COLUMNS": 12, "ROWS": 4, "ACROSS": 3}.items():
            monkeypatch.setattr(f"sfcpart.cli.demo.{name}", value)
        monkeypatch.setattr("sfcpart.report.painting.FINE", 1)
        slow = ("multilevel", "spectral")  # minutes for the sample meshes
        quick = {name: method for name, method in METHODS.items() if name not in slow}
        monkeypatch.setattr("sfcpart.comparison.METHODS", quick)

    def call(line: str) -> Ended:
        from sfcpart.cli.run import run

        code = run(shlex.split(line))
        out, err = capsys.readouterr()
        # A cold cache of kernels is announced; that is tested by itself.
        err = "".join(row for row in err.splitlines(True) if "first run" not in row)
        return Ended(code, out, err)

    return call


@pytest.fixture
def process(tmp_path):
    """Give a function that runs a command line as a process of its own."""

    def call(*arguments: str, **environment: str) -> subprocess.CompletedProcess[str]:
        path = os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")])
        return subprocess.run(
            [sys.executable, "-m", "sfcpart.cli", *arguments],
            capture_output=True,
            text=True,
            cwd=tmp_path,
            env={**os.environ, "PYTHONPATH": path, **environment},
            timeout=300,
            check=False,
        )

    return call
