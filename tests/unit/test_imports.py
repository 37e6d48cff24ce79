"""`import sfcpart` is light: it starts no MPI, compiles nothing and loads no heavy library."""

from __future__ import annotations

import json
import os
import subprocess
import sys

import pytest

HEAVY = ["numba", "scipy", "meshio", "h5py", "mpi4py", "matplotlib", "click", "rich", "vtk"]


def loaded_after(statement: str, **environment: str) -> set[str]:
    """Return the top-level modules that a fresh interpreter holds after a statement."""
    show = "import json, sys; print(json.dumps(sorted({m.split('.')[0] for m in sys.modules})))"
    clean = {
        name: value
        for name, value in os.environ.items()
        if not name.startswith(("PMI", "OMPI", "MV2", "COV_", "COVERAGE"))
    }
    done = subprocess.run(
        [sys.executable, "-c", f"{statement}; {show}"],
        env={**clean, **environment},
        capture_output=True,
        text=True,
        check=True,
    )
    return set(json.loads(done.stdout.splitlines()[-1]))


def test_importing_the_package_loads_nothing_heavy():
    loaded = loaded_after("import sfcpart")
    assert "sfcpart" in loaded
    assert loaded.isdisjoint(HEAVY)


def test_all_public_names_can_be_had():
    loaded_after("import sfcpart; [getattr(sfcpart, name) for name in sfcpart.__all__]")


def test_public_names_stay_what_they_are_when_modules_are_loaded():
    # Importing `sfcpart.x` sets the attribute `x` of the package, whatever was there before.
    loaded_after(
        "import importlib, pkgutil, sfcpart; "
        "names = [m.name for m in pkgutil.walk_packages(sfcpart.__path__, 'sfcpart.')]; "
        "[importlib.import_module(n) for n in names if not n.startswith('sfcpart.comm.mpi') "
        "and not n.endswith('__main__')]; "
        "modules = [n for n in sfcpart.__all__ if n in vars(sfcpart) "
        "and type(getattr(sfcpart, n)) is type(importlib)]; "
        "assert not modules, modules"
    )


def test_no_launcher_no_mpi():
    assert "mpi4py" not in loaded_after("from sfcpart.comm import world; world().barrier()")


@pytest.mark.parametrize("mark", ["PMI_RANK", "PMIX_RANK", "OMPI_COMM_WORLD_RANK"])
def test_a_launcher_is_seen_by_what_it_leaves_in_the_environment(mark):
    # A module that stands in for comm/mpi: the real one would look for its launcher.
    stand_in = (
        "import sys, types; m = types.ModuleType('sfcpart.comm.mpi'); m.MpiComm = dict; "
        "sys.modules[m.__name__] = m; from sfcpart.comm import world; assert world() == {}"
    )
    loaded_after(stand_in, **{mark: "0"})


@pytest.mark.skipif(sys.platform != "linux", reason="the processors of a process are Linux's")
def test_threads_follow_the_environment():
    wanted = "from sfcpart.kernels.threads import n_threads; assert n_threads() == {}"
    loaded_after(wanted.format(3), SFCPART_THREADS="3")
    loaded_after(
        wanted.format("__import__('os').sched_getaffinity(0).__len__()"), SFCPART_THREADS=""
    )
