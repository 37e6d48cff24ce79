"""Damaged copies of files: a valid mesh or our error, never anything else.

Bounded and seeded. Each format's copies are read in a child process with limits on memory and
time, so that an exit, a hang or a huge request shows itself. What is promised: our own readers
and meshio's formats never leave with anything but an `SfcpartError`. The HDF5 library is C code
that can crash the process on a corrupt file; h5py cannot prevent this, so for VTKHDF a death by
a signal is counted and allowed within the HDF5 library only, and an exception is not.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest

from sfcpart.files.meshes.faces_file import write_faces
from sfcpart.mesh.mesh import Mesh
from tests.file_samples import MIXED, SU2, vtk_grid, write_shell, write_tets, write_ugrid

N_COPIES = int(os.environ.get("SFCPART_DAMAGED_COPIES", "40"))
MEMORY = 4 << 30
SECONDS = 240

CHILD = """
import faulthandler, json, resource, sys
from pathlib import Path
import numpy as np
faulthandler.dump_traceback_later({seconds}, exit=True)
from sfcpart.files.meshes import meshio_files
from sfcpart.files.meshes.read import read_mesh
from sfcpart.errors import SfcpartError
import meshio, h5py
meshio_files.PATIENCE = 1.0
resource.setrlimit(resource.RLIMIT_AS, ({memory}, resource.RLIM_INFINITY))
done = Path(sys.argv[1]).parent / "done.json"
outcomes = []
for name in sys.argv[1:]:
    done.write_text(json.dumps([*outcomes, [name, "started", ""]]))
    try:
        mesh = read_mesh(name)
        assert mesh.n_cells > 0
        assert np.isfinite(mesh.centers).all() or mesh.points is not None
        assert mesh.points is None or np.isfinite(mesh.points).all()
        assert mesh.points is None or 0 <= mesh.indices.min() <= mesh.indices.max() < mesh.n_points
        assert len(mesh.indptr) == mesh.n_cells + 1 == len(mesh.kind) + 1
        assert all(len(values) == mesh.n_cells for values in mesh.cell_fields.values())
        outcomes.append([name, "mesh", ""])
    except SfcpartError as error:
        told = str(error)
        plain = "\\n" not in told and name in told and "not foreseen" not in told
        outcomes.append([name, "error" if plain else "unclear", str(error)])
    except BaseException as error:
        outcomes.append([name, "escaped", repr(error)])
    done.write_text(json.dumps(outcomes))
"""


def damaged(content: bytes, rng: np.random.Generator) -> bytes:
    """Return a copy with bytes flipped, stretches lost or swapped, or digits changed."""
    data = np.frombuffer(content, np.uint8).copy()
    n = len(data)
    way = rng.integers(5)
    if way == 0:
        places = rng.integers(n, size=rng.integers(1, 9))
        data[places] ^= (1 << rng.integers(8, size=len(places))).astype(np.uint8)
    elif way == 1:
        start = rng.integers(n)
        data = np.delete(data, slice(start, start + rng.integers(1, max(2, n // 8))))
    elif way == 2:
        size = int(rng.integers(1, max(2, n // 8)))
        a, b = sorted(rng.integers(0, max(1, n - size), size=2))
        first, second = data[a : a + size].copy(), data[b : b + size].copy()
        data[b : b + size], data[a : a + size] = first, second
    elif way == 3:
        data = data[: rng.integers(1, n)]
    else:  # a digit, or a byte of a number, becomes another: counts and ids go wrong
        digits = np.flatnonzero((data >= 48) & (data < 58))
        pool = digits if len(digits) else np.arange(n)
        places = rng.choice(pool, size=min(3, len(pool)))
        data[places] = rng.choice(np.frombuffer(b"0123456789-e", np.uint8), size=len(places))
    return data.tobytes()


def write_vtk(path: Path, name: str) -> None:
    import vtk

    writer = {
        "xml": vtk.vtkXMLUnstructuredGridWriter,
        "legacy": vtk.vtkUnstructuredGridWriter,
        "hdf": vtk.vtkHDFWriter,
    }[name]()
    writer.SetInputDataObject(vtk_grid(MIXED) if name == "hdf" else vtk_grid())
    writer.SetFileName(str(path))
    if name == "xml":
        writer.SetBlockSize(128)
        writer.EncodeAppendedDataOff()
    if name == "legacy":
        writer.SetFileTypeToBinary()
    writer.Write()


def write_faces_mesh(path: Path) -> None:
    pairs = [[i, i + 1] for i in range(29)] + [[29, -1]]
    centers = np.random.default_rng(0).random((30, 3))
    mesh = Mesh.from_faces(pairs, np.ones(30), centers, np.ones(30), cell_fields={"w": centers})
    write_faces(path, mesh)


WRITERS = {
    "xml.vtu": lambda path: write_vtk(path, "xml"),
    "meshio.vtu": lambda path: write_tets(path, "vtu"),
    "ascii.vtu": lambda path: write_tets(path, "vtu", binary=False),
    "legacy.vtk": lambda path: write_vtk(path, "legacy"),
    "ascii.vtk": lambda path: write_tets(path, "vtk42", binary=False),
    "v22.msh": lambda path: write_tets(path, "gmsh22", binary=False),
    "v41.msh": lambda path: write_shell(path, "gmsh"),
    "a.su2": lambda path: path.write_text(SU2),
    "a.ply": lambda path: write_shell(path, "ply"),
    "a.b8.ugrid": write_ugrid,
    "a.mesh": lambda path: write_tets(path, "medit"),
    "a.inp": lambda path: write_tets(path, "abaqus"),
    "faces.h5": write_faces_mesh,
    "a.vtkhdf": lambda path: write_vtk(path, "hdf"),
}


def outcomes(folder: Path, names: list[str]) -> list[tuple[str, str, str]]:
    """Read all copies in child processes; start again behind a copy that ended one."""
    found: list[tuple[str, str, str]] = []
    code = CHILD.format(seconds=SECONDS, memory=MEMORY)
    while len(found) < len(names):
        job = subprocess.run(
            [sys.executable, "-c", code, *names[len(found) :]],
            capture_output=True,
            text=True,
            check=False,
            timeout=2 * SECONDS,
        )
        rows = json.loads((folder / "done.json").read_text())
        if job.returncode != 0:
            assert rows[-1][1] == "started", job.stderr[-2000:]
            rows[-1][1:] = ["died", f"{job.returncode}: {job.stderr[-500:]}"]
        else:
            assert (job.stdout, job.stderr) == ("", ""), "the library printed something"
        found += [tuple(row) for row in rows]
    return found


@pytest.mark.parametrize("name", WRITERS)
def test_damaged_copies_give_a_mesh_or_our_error(tmp_path, name):
    original = tmp_path / name
    WRITERS[name](original)
    content = original.read_bytes()
    rng = np.random.default_rng(sum(name.encode()))
    names = [str(original)]
    for i in range(N_COPIES):
        (tmp_path / str(i)).mkdir()
        copy = tmp_path / str(i) / name
        copy.write_bytes(damaged(content, rng))
        names.append(str(copy))
    found = outcomes(tmp_path, names)
    assert found[0][1] == "mesh"
    wrong = [row for row in found if row[1] not in ("mesh", "error")]
    if name.endswith((".vtkhdf", ".h5")):
        wrong = [row for row in wrong if row[1] != "died" or not row[2].startswith("-")]
    assert not wrong
    assert sum(row[1] == "error" for row in found) > N_COPIES // 10
