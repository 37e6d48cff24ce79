"""The files of a split are the same bytes for any number of ranks, whoever holds which cells."""

from __future__ import annotations

import hashlib
import tempfile
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

import sfcpart
from sfcpart.comm import run_ranks
from sfcpart.mesh.mesh import Mesh
from sfcpart.slices.mesh_slice import MeshSlice, cut_mesh
from tests.parted import SAMPLES, parted
from tests.strategies import Case, small_meshes

SIZES = (1, 2, 3, 4, 7)
ACROSS = ["faces", "points"]
FORMATS = ("vtkhdf", "vtu")


def digests(folder: Path) -> dict[str, str]:
    """Return the digest of every file in a folder, hidden ones included."""
    return {
        str(file.relative_to(folder)): hashlib.sha256(file.read_bytes()).hexdigest()
        for file in sorted(folder.rglob("*"))
        if file.is_file()
    }


def deliver(mesh: Mesh | MeshSlice, place: Path, n_parts: int, **wish) -> None:
    """Split, measure and write."""
    how = {name: wish.pop(name) for name in ("layers", "across", "compress") if name in wish}
    partition = sfcpart.split(mesh, n_parts, **wish)
    load = {name: wish[name] for name in ("weights", "speeds") if name in wish}
    assessment = sfcpart.assess(mesh, partition, **load)
    sfcpart.write_split(place, mesh, partition, assessment=assessment, formats=FORMATS, **how)


def assert_law(mesh: Mesh, size: int, n_parts: int, *, bounds=None, **wish) -> None:
    """Compare the folder that several ranks write with that of one."""
    with tempfile.TemporaryDirectory() as folder:
        one, many = Path(folder, "one"), Path(folder, "many")
        deliver(mesh, one, n_parts, **wish)
        run_ranks(
            size,
            lambda comm: deliver(cut_mesh(mesh, comm, rank_first=bounds), many, n_parts, **wish),
        )
        wanted = digests(one)
        assert {"parts.vtkhdf", "lists.h5", "cell_part.npy", "summary.json"} <= set(wanted)
        assert digests(many) == wanted


@settings(max_examples=6)
@given(data=st.data())
def test_any_slices_of_a_mesh_give_the_same_files(data) -> None:
    mesh = data.draw(small_meshes())
    size = data.draw(st.sampled_from(SIZES))
    inner = data.draw(st.lists(st.integers(0, mesh.n_cells), min_size=size - 1, max_size=size - 1))
    wish = {"layers": data.draw(st.integers(0, 2)), "across": data.draw(st.sampled_from(ACROSS))}
    n_parts = data.draw(st.integers(1, min(5, mesh.n_cells)))
    assert_law(mesh, size, n_parts, bounds=[0, *sorted(inner), mesh.n_cells], **wish)


@pytest.mark.parametrize("name", [name for name in SAMPLES if name != "hybrid"])
def test_all_sorts_of_meshes(name: str) -> None:
    assert_law(parted(name).mesh, 3, 5)


def test_packed_files() -> None:
    assert_law(parted("polyhedra").mesh, 2, 3, compress=True)


def test_one_rank_holds_everything(degenerate: Case) -> None:
    mesh = degenerate.mesh
    wish = {} if degenerate.weights is None else {"weights": degenerate.weights}
    if degenerate.weights is not None and not np.any(degenerate.weights):
        wish = {}
    if wish:
        mesh, wish = mesh.with_cell_field("load", degenerate.weights), {"weights": "load"}
    everything = [0, 0, mesh.n_cells, mesh.n_cells, mesh.n_cells]
    assert_law(mesh, 4, min(degenerate.n_parts, mesh.n_cells), bounds=everything, **wish)


def test_fewer_cells_than_ranks() -> None:
    assert_law(Mesh.from_arrays(np.eye(4)[:, :3], {"tetra": [[0, 1, 2, 3]]}), 7, 1)


WISHES = {
    "weights": {"weights": "tetra=2 * depth:0=3,other=1"},
    "faces": {"weights": "cell=1,face=2"},
    "speeds": {"speeds": [1.0, 2.0, 1.0, 0.5, 1.0, 1.0]},
    "levels": {"levels": (2, 3)},
    "limits": {"limit_weights": "depth", "limits": 1e6},
    "together": {"together": "body"},
    "pairs": {"pairs": np.array([[0, 100], [7, 80], [80, 81]])},
    "rank 0": {"method": "coordinate"},
    "least": {"cuts": "least"},
    "smoothed": {"method": "smoothed"},
}


@pytest.mark.parametrize("name", WISHES)
def test_all_that_may_be_wished(name: str) -> None:
    mesh = parted("tets").mesh
    number = np.arange(mesh.n_cells)
    mesh = mesh.with_cell_field("depth", number % 3)
    mesh = mesh.with_cell_field("body", np.where(number % 50 == 0, number // 100, -1))
    assert_law(mesh, 3, 6, **WISHES[name])
