"""`sfcpart split` and `assess` under mpiexec: the same bytes and words as without, on any ranks."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest

from sfcpart.files.meshes.faces_file import write_faces
from sfcpart.files.parts.vtkhdf_write import write_vtkhdf
from sfcpart.mesh.refined import refined_box
from tests.mpi.harness import package_path, run_script
from tests.parted import parted
from tests.properties.test_any_ranks import digests

JOB = Path(__file__).with_name("files_job.py")
MESHES = Path(__file__).resolve().parents[2] / "meshes"


@pytest.fixture(scope="module")
def folder(tmp_path_factory) -> Path:
    """Make the input files: partitions with ghosts and walls, hanging nodes, a legacy file."""
    place = tmp_path_factory.mktemp("input")
    case = parted("mixed", n_parts=3)
    write_vtkhdf(place / "channel.vtkhdf", case.mesh, partition=case.partition, halo=case.halo)
    write_faces(place / "refined.h5", refined_box(4).to_mesh())
    shutil.copy(MESHES / "pier_shell.vtk", place / "shell.vtk")
    shutil.copy(JOB, place / "job.py")
    return place


@pytest.fixture(scope="module")
def alone(folder: Path) -> tuple[dict[str, str], str]:
    """Run the script without a launcher."""
    out = folder / "alone"
    out.mkdir()
    done = subprocess.run(
        [sys.executable, str(JOB), str(folder), str(out)],
        capture_output=True,
        text=True,
        timeout=200,
        check=True,
        env={**os.environ, **package_path()},
    )
    assert "exit codes [0, 0, 0, 0, 0, 0, 0, 0, 4, 5, 2, 3, 4, 0]" in done.stdout
    return digests(out), done.stdout


@pytest.mark.large  # seventeen processes
@pytest.mark.parametrize("size", [1, 2, 3, 4, 7])
def test_files_and_words_do_not_depend_on_the_ranks(size, folder, alone) -> None:
    out = folder / f"ranks{size}"
    out.mkdir()
    printed = run_script(folder / "job.py", size, str(folder), str(out), timeout=300)
    assert digests(out) == alone[0]
    said = "".join(f"{line}\n" for line in printed.splitlines() if not _is_aside(line))
    assert said == alone[1]
    errors = [line for line in printed.splitlines() if line.startswith("sfcpart: error")]
    assert len(errors) == 5  # each is told once
    assert re.search(r"shell\.vtk is read by rank 0", printed)
    assert re.search(r"replay runs on rank 0 alone", printed)


def _is_aside(line: str) -> bool:
    """Tell a line of the error stream, which the launcher mixes with the output."""
    return line.startswith("sfcpart: ")
