"""Series on disk: HDF5, PVD, folders; and the series that tools make."""

from __future__ import annotations

import subprocess
import sys

import h5py
import meshio
import numpy as np
import pytest

import sfcpart
from sfcpart.errors import FileError, InputError, MeshError
from sfcpart.files.series.hdf5_series import write_series
from sfcpart.graph import cell_graph
from sfcpart.mesh.shapes import lattice
from tools.series.front import front_series, front_tree
from tools.series.octree import Octree
from tools.series.spots import slow_series, spot_series


def same(first, second) -> None:
    """Assert that two series hold the same."""
    for one, other in zip(first, second, strict=True):
        assert np.array_equal(one.mesh.centers, other.mesh.centers)
        assert np.array_equal(one.mesh.faces.cell, other.mesh.faces.cell)
        assert one.steps == other.steps
        for key in ("weight", "parent", "speed"):
            values = [getattr(frame, key) for frame in (one, other)]
            assert (values[0] is None) == (values[1] is None)
            assert values[0] is None or np.array_equal(*values)


@pytest.mark.parametrize(
    "make",
    [
        lambda: front_series(4, n_levels=1, n_frames=4, subcycling=True),
        lambda: spot_series(4, n_frames=3),
        lambda: slow_series(4, n_parts=3, n_frames=4),
    ],
)
def test_a_series_in_hdf5_comes_back(make, tmp_path):
    place = tmp_path / "run.h5"
    count = write_series(place, make())
    series = sfcpart.read_series(place)
    assert len(series) == count
    same(make(), series)
    same(make(), series)  # it can be gone through again


def test_one_mesh_is_written_and_read_once(tmp_path):
    write_series(tmp_path / "run.h5", spot_series(4, n_frames=3))
    with h5py.File(tmp_path / "run.h5") as file:
        assert ["faces_mesh" in frame for frame in file["series"].values()] == [True, False, False]
    frames = list(sfcpart.read_series(tmp_path / "run.h5"))
    assert frames[0].mesh is frames[2].mesh


def test_a_mesh_can_stand_beside_the_weights(tmp_path):
    mesh = lattice((3, 3)).to_mesh()
    with h5py.File(tmp_path / "run.h5", "w") as file:
        file.create_group("series").attrs["layout"] = 1
        file["series/0/weight"] = np.arange(9)
    frame = next(iter(sfcpart.read_series(tmp_path / "run.h5", mesh=mesh)))
    assert frame.mesh is mesh
    assert frame.steps == 1
    with pytest.raises(FileError, match="0 has no faces_mesh; give the mesh beside the file"):
        list(sfcpart.read_series(tmp_path / "run.h5"))


@pytest.mark.parametrize(
    ("spoil", "error", "words"),
    [
        (lambda file: file.pop("series"), FileError, "has no group series"),
        (lambda file: file["series"].attrs.pop("layout"), FileError, "layout None; wanted 1"),
        (lambda file: file["series"].clear(), FileError, "series is empty"),
        (
            lambda file: put(file, "weight", np.ones(3)),
            InputError,
            r"frame_000000: weights have shape \(3,\)",
        ),
        (lambda file: put(file, "weight", b"heavy"), FileError, "wanted numbers"),
        (lambda file: put(file, "parent", np.ones(176)), InputError, "parents are float64"),
        (
            lambda file: put(file, "faces_mesh/cell_measure", np.full(176, -1.0)),
            MeshError,
            "cell 0",
        ),
    ],
)
def test_damaged_series_are_refused(spoil, error, words, tmp_path):
    place = tmp_path / "run.h5"
    write_series(place, spot_series(4, n_frames=1))
    with h5py.File(place, "a") as file:
        spoil(file)
    with pytest.raises(error, match=words):
        list(sfcpart.read_series(place))


def put(file, name, values) -> None:
    """Replace a dataset of the first frame."""
    frame = file["series/frame_000000"]
    frame.pop(name, None)
    frame[name] = values


def test_an_empty_series_is_not_written(tmp_path):
    with pytest.raises(InputError, match="the series is empty"):
        write_series(tmp_path / "run.h5", [])


def write_quads(path, weight, **fields) -> None:
    mesh = lattice((3, 2)).to_mesh()
    data = {"w": [np.asarray(weight, float)]} | {k: [v] for k, v in fields.items()}
    cells = mesh.indices.reshape(-1, 4)
    meshio.Mesh(np.pad(mesh.points, [(0, 0), (0, 1)]), [("quad", cells)], cell_data=data).write(
        path
    )


def pvd(*entries: str, kind: str = "Collection") -> str:
    rows = "".join(f"<DataSet {entry}/>" for entry in entries)
    return f'<VTKFile type="{kind}"><Collection>{rows}</Collection></VTKFile>'


def test_a_pvd_lists_meshes_in_order_of_time(tmp_path):
    for k in range(3):
        write_quads(tmp_path / f"m{k}.vtu", np.arange(6) + 10 * k)
    (tmp_path / "run.pvd").write_text(
        pvd(
            'timestep="2" file="m2.vtu"',
            'timestep="0" file="m0.vtu"',
            'timestep="1.5" file="m1.vtu"',
        )
    )
    series = sfcpart.read_series(tmp_path / "run.pvd")
    frames = list(series)
    assert [frame.mesh.cell_fields["w"][0] for frame in frames] == [0, 10, 20]
    assert frames[1].mesh.centers is frames[0].mesh.centers  # the same cells are known as such
    found = sfcpart.replay(series, 2, weights="w", rules=["every:1"])
    assert found.timetable.n_frames == 3


def test_the_cell_graph_of_unchanged_cells_is_built_once(tmp_path):
    for k in range(2):
        write_quads(tmp_path / f"{k}.vtu", np.ones(6))
    graphs = [cell_graph(frame.mesh) for frame in sfcpart.read_series(tmp_path)]
    assert graphs[0] is graphs[1]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("no xml", "is no XML"),
        (pvd('timestep="0" file="a.vtu"', kind="Image"), "is no PVD file"),
        (pvd('timestep="soon" file="a.vtu"'), "timestep 'soon' is no number"),
        (pvd('timestep="0"'), "entry 0 names no file"),
        (pvd('timestep="1" file="a"', 'timestep="1" file="b"'), "several files at time 1"),
        (pvd(), "the series is empty"),
        (pvd('timestep="0" file="none.vtu"'), "none.vtu: cannot be read"),
    ],
)
def test_collections_that_are_none_are_refused(text, words, tmp_path):
    (tmp_path / "run.pvd").write_text(text)
    with pytest.raises(FileError, match=words):
        list(sfcpart.read_series(tmp_path / "run.pvd"))


def test_a_folder_of_meshes_with_parents(tmp_path):
    write_quads(tmp_path / "m_9.vtu", np.ones(6), parent=np.zeros(6))
    write_quads(tmp_path / "m_10.vtu", np.ones(6), parent=np.arange(6.0)[::-1].copy())
    frames = list(sfcpart.read_series(tmp_path))
    assert frames[0].parent is None
    assert frames[1].parent.tolist() == [5, 4, 3, 2, 1, 0]
    renamed = list(sfcpart.read_series(tmp_path, parent="w"))
    assert renamed[1].parent.tolist() == [1] * 6


def test_other_cells_may_have_no_parents_but_no_odd_ones(tmp_path):
    write_quads(tmp_path / "0.vtu", np.ones(6))
    meshio.Mesh(np.eye(3), [("triangle", np.array([[0, 1, 2]]))]).write(tmp_path / "1.vtu")
    assert [frame.n_cells for frame in sfcpart.read_series(tmp_path)] == [6, 1]
    write_quads(tmp_path / "1.vtu", np.ones(6), parent=np.full(6, 0.5))
    with pytest.raises(InputError, match="holds fractions"):
        list(sfcpart.read_series(tmp_path))
    write_quads(tmp_path / "1.vtu", np.ones(6), parent=np.zeros((6, 3)))
    with pytest.raises(InputError, match=r"1.vtu: parents are int64 of shape \(6, 3\)"):
        list(sfcpart.read_series(tmp_path))


def test_a_folder_of_weights(tmp_path):
    mesh = lattice((3, 2)).to_mesh()
    np.save(tmp_path / "step_10.npy", np.arange(6))
    (tmp_path / "step_2.txt").write_text("1\n" * 6)
    series = sfcpart.read_series(tmp_path, mesh=mesh)
    assert [frame.weight.tolist() for frame in series] == [[1] * 6, [0, 1, 2, 3, 4, 5]]
    np.save(tmp_path / "step_11.npy", np.arange(5))
    with pytest.raises(InputError, match="holds 5 values; wanted 6"):
        list(sfcpart.read_series(tmp_path, mesh=mesh))


def test_what_is_no_series_is_refused(tmp_path):
    mesh = lattice((3, 2)).to_mesh()
    with pytest.raises(FileError, match="the folder holds no meshes"):
        sfcpart.read_series(tmp_path)
    with pytest.raises(FileError, match="the folder holds no weights"):
        sfcpart.read_series(tmp_path, mesh=mesh)
    with pytest.raises(FileError, match="none.h5: cannot be read: No such file"):
        sfcpart.read_series(tmp_path / "none.h5")
    with pytest.raises(FileError, match="none.pvd: cannot be read: No such file"):
        sfcpart.read_series(tmp_path / "none.pvd")
    (tmp_path / "a.txt").write_text("hello")
    with pytest.raises(
        FileError, match="is no series; wanted an HDF5 file, a PVD file or a folder"
    ):
        sfcpart.read_series(tmp_path / "a.txt")


def test_the_front_is_an_octree_with_hanging_nodes():
    before, tree = front_tree(8, 2, time=0.45), front_tree(8, 2, time=0.5)
    mesh = tree.to_mesh()
    assert mesh.measures.sum() == pytest.approx(2 * 8**3)
    face, area = mesh.faces.cell, mesh.faces.measure
    inner = face[:, 1] >= 0
    ratio = tree.size[face[inner, 0]] / tree.size[face[inner, 1]]
    assert set(ratio) == {0.5, 1.0}  # neighbours differ by one level at most; the finer is first
    # the faces of every cell close it: their area is that of a cube
    closed = np.bincount(face[:, 0], area, tree.size.size)
    closed += np.bincount(face[inner, 1], area[inner], tree.size.size)
    assert closed == pytest.approx(6 * (tree.size / 4.0) ** 2)
    assert len(np.unique(tree.code)) == tree.size.size
    parent = tree.parents(before)
    inside = (tree.corner >= before.corner[parent]).all(axis=1)
    assert (
        inside & (tree.corner < (before.corner + before.size[:, None])[parent]).all(axis=1)
    ).all()


def test_leaves_are_found_by_points():
    tree = Octree.grow((2, 1, 1), 2, lambda center, level: center[:, 0] < 1)
    middle = tree.corner + tree.size[:, None] // 2
    assert tree.leaf_at(middle).tolist() == list(range(len(tree.size)))
    assert np.bincount(tree.level).tolist() == [1, 0, 64]


def test_the_tool_writes_the_same_bytes_twice(tmp_path, root):
    def run(*arguments):
        return subprocess.run(
            [sys.executable, "-m", "tools.series", *arguments],
            capture_output=True, text=True, cwd=root, timeout=120, check=False,
        )  # fmt: skip

    wish = ("--size", "4", "--levels", "1", "--frames", "3", "--subcycling")
    for name in ("a.h5", "b.h5"):
        ended = run("front", str(tmp_path / name), *wish)
        assert ended.returncode == 0, ended.stderr
        assert ended.stdout.endswith("3 frames\n")
    assert (tmp_path / "a.h5").read_bytes() == (tmp_path / "b.h5").read_bytes()
    assert len(sfcpart.read_series(tmp_path / "a.h5")) == 3
    wrong = run("spots", str(tmp_path / "c.h5"), "--levels", "2")
    assert wrong.returncode == 2
    assert "spots does not take that" in wrong.stderr
