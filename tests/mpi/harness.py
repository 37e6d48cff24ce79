"""Start MPI jobs from a test process that never imports mpi4py.

`run_job(module, size, folder)` starts `mpiexec -n SIZE python -m MODULE FOLDER` with a time limit
and returns when it has ended; what the ranks saw, they wrote into the folder. `run_script(path,
size, ...)` does the same for a user's script, in its own folder, and `run_command` for a verb of
`sfcpart`. A job that fails, or hangs and is killed with all its processes, raises with what it
printed.
"""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
from pathlib import Path

import sfcpart

__all__ = ["MpiJobError", "mpiexec", "run_command", "run_job", "run_script"]

ROOT = Path(__file__).resolve().parents[2]


class MpiJobError(Exception):
    """A job failed or ran out of time."""


def mpiexec() -> str:
    """Return the launcher: the one beside this Python if there is one (PyPI package mpich)."""
    beside = Path(sys.executable).with_name("mpiexec")
    found = str(beside) if beside.exists() else shutil.which("mpiexec")
    if found is None:
        raise MpiJobError("no mpiexec: install the extra 'test', which brings one")
    return found


def run_job(module: str, size: int, folder: Path, *, timeout: float = 120.0) -> None:
    """Run one module on `size` ranks with the folder as its argument; raise if it does not end."""
    # `python -m tests.mpi...` is found from the root
    _run(["-m", module, str(folder)], size, cwd=ROOT, what=module, timeout=timeout)


def package_path() -> dict[str, str]:
    """Return the variable by which another folder finds the package that is tested here."""
    return {"PYTHONPATH": str(Path(sfcpart.__file__).parents[1])}


def run_script(path: Path, size: int, *arguments: str, timeout: float = 120.0) -> str:
    """Run a script on `size` ranks in the folder it lies in; return what it printed."""
    return _run(
        [path.name, *arguments],
        size,
        cwd=path.parent,
        what=path.name,
        timeout=timeout,
        more=package_path(),
    )


def run_command(arguments: list[str], size: int, folder: Path, *, timeout: float = 120.0) -> str:
    """Run `sfcpart` on `size` ranks in a folder; return what it printed."""
    words, what = ["-m", "sfcpart.cli", *arguments], f"sfcpart {arguments[0]}"
    return _run(words, size, cwd=folder, what=what, timeout=timeout, more=package_path())


def _run(
    arguments: list[str],
    size: int,
    *,
    cwd: Path,
    what: str,
    timeout: float,
    more: dict[str, str] | None = None,
) -> str:
    """Run Python on `size` ranks; return what all printed."""
    job = subprocess.Popen(
        [mpiexec(), "-n", str(size), sys.executable, *arguments],
        cwd=cwd,
        env={**_environment(), **(more or {})},
        stdin=subprocess.DEVNULL,
        stdout=subprocess.PIPE,
        stderr=subprocess.STDOUT,
        text=True,
        start_new_session=True,  # so that the whole job can be killed and nothing else
    )
    try:
        printed, _ = job.communicate(timeout=timeout)
    except subprocess.TimeoutExpired:
        _kill(job)
        printed, _ = job.communicate()
        raise MpiJobError(f"{size} ranks of {what} ran over {timeout:g} s:\n{printed}") from None
    if job.returncode != 0:
        raise MpiJobError(f"{size} ranks of {what} ended with {job.returncode}:\n{printed}")
    return printed


def _environment() -> dict[str, str]:
    """Return the environment of a job whose ranks outnumber the cores."""
    one_thread = {"OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"}
    # MPICH: waiting ranks sleep instead of spinning on the cores that the others need (halves
    # the time of four ranks on two busy cores).
    patient = {"MPIR_CVAR_ENABLE_HEAVY_YIELD": "1", "MPIR_CVAR_POLLS_BEFORE_YIELD": "100"}
    return {**os.environ, **one_thread, **patient}


def _kill(job: subprocess.Popen[str]) -> None:
    """Ask the launcher to end its ranks, then kill what is left of its session."""
    for sign in (signal.SIGTERM, signal.SIGKILL):
        try:
            os.killpg(job.pid, sign)
            job.wait(5)
        except (ProcessLookupError, subprocess.TimeoutExpired):
            continue
