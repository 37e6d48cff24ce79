"""The command line as under a launcher, in this process: as rank 0, and as another rank."""

from __future__ import annotations

import os

import numpy as np
import pytest

from sfcpart.cli import console, ranks, run, split_job
from sfcpart.comm import SerialComm
from sfcpart.launcher import local_ranks
from tests.parted import parted


class Second(SerialComm):
    """A communicator that says it is of rank 1 of 2, for what does no collective work."""

    rank = 1
    size = 2


@pytest.fixture
def launched(monkeypatch):
    """Let everything believe that a launcher started this process, alone."""
    for module in (ranks, run, split_job):
        monkeypatch.setattr(module, "launched", lambda: True)
    monkeypatch.setattr("sfcpart.comm.world", lambda: comm[0])
    monkeypatch.setattr(run, "_meet_the_other_ranks", lambda: None)
    monkeypatch.setattr(console, "_hushed", [])
    monkeypatch.setenv("SFCPART_THREADS", "1")
    comm = [SerialComm()]
    return comm


@pytest.fixture
def channel(tmp_path):
    """Write a file that is read by slices."""
    from sfcpart.files.parts.vtkhdf_write import write_vtkhdf

    case = parted("section", n_parts=2)
    path = tmp_path / "channel.vtkhdf"
    write_vtkhdf(path, case.mesh, partition=case.partition, halo=case.halo)
    return path


def test_split_and_assess_on_slices(launched, channel, tmp_path, capsys):
    out = tmp_path / "out"
    words = ["split", str(channel), "-n", "4", "-o", str(out), "--picture", "--format", "same"]
    assert run.run([*words, "--format", "vtkhdf", "--method", "coordinate"]) == 0
    told = capsys.readouterr()
    assert "coordinate runs on rank 0" in told.err
    assert "--picture, --format same: made by rank 0" in told.err
    assert {"parts.png", "mesh.vtkhdf", "parts.vtkhdf"} <= {file.name for file in out.iterdir()}
    csv, picture = tmp_path / "a.csv", tmp_path / "a.png"
    shown = ["--csv", str(csv), "--picture", str(picture)]
    assert run.run(["assess", str(channel), str(out), *shown]) == 0
    assert "pictures and reports are made by rank 0" in capsys.readouterr().err
    assert csv.exists()
    assert picture.exists()
    assert run.run(["split", str(channel), "-n", "2", "--cuts", "least", "-q"]) == 0
    assert "--cuts least runs on rank 0" in capsys.readouterr().err


def test_parts_of_slices_from_everywhere(launched, channel, tmp_path, capsys):
    n_cells = parted("section").mesh.n_cells
    np.save(tmp_path / "short.npy", np.zeros(n_cells - 1, int))
    (tmp_path / "parts.txt").write_text("\n".join(["0", "1"] * (n_cells // 2)))
    assert run.run(["assess", str(channel), "--field", "part", "-q"]) == 0
    assert run.run(["assess", str(channel), str(tmp_path / "parts.txt"), "-q"]) == 0
    assert run.run(["assess", str(channel), "--field", "colour"]) == 3
    assert run.run(["assess", str(channel), str(tmp_path / "short.npy")]) == 3
    assert run.run(["assess", str(channel), str(tmp_path / "none.npy")]) == 4
    told = capsys.readouterr().err
    assert "no cell field 'colour'" in told
    assert "wanted" in told


def test_a_folder_of_another_mesh_is_refused(launched, channel, tmp_path, capsys):
    for name, n_parts in (("tets", 3), ("shell", 2)):
        from sfcpart.api import split, write_split

        mesh = parted(name).mesh
        write_split(tmp_path / name, mesh, split(mesh, n_parts))
        assert run.run(["assess", str(channel), str(tmp_path / name)]) == 5
    told = capsys.readouterr().err
    assert "the mesh has" in told or "no part holds" in told


def test_compare_on_slices(launched, channel, tmp_path, capsys):
    mine = ["--given", "mine:part"]
    shown = ["--picture", str(tmp_path / "a.png"), "--csv", str(tmp_path / "a.csv")]
    words = ["compare", str(channel), "-n", "2", "-m", "hilbert", "-m", "coordinate", *mine, *shown]
    assert run.run([*words, "--report", str(tmp_path / "a.html")]) == 0
    assert {"a.png", "a.csv", "a.html"} <= {file.name for file in tmp_path.iterdir()}
    np.save(tmp_path / "parts.npy", np.zeros(parted("section").mesh.n_cells, int))
    words = ["compare", str(channel), "-n", "2", "-m", "rows", "--given"]
    assert run.run([*words, f"mine:{tmp_path}/parts.npy", "-q"]) == 0
    assert run.run([*words, f"rows:{tmp_path}/parts.npy", "-q"]) == 3


def test_other_formats_are_spread(launched, root, capsys):
    assert run.run(["split", str(root / "meshes" / "turbine.vtu"), "-n", "3", "-q"]) == 0
    assert "turbine.vtu is read by rank 0" in capsys.readouterr().err


def test_other_verbs_run_on_rank_0(launched, channel, capsys):
    assert run.run(["inspect", str(channel)]) == 0
    assert run.run(["figures", "--help"]) == 0
    assert run.run(["rebalance", "--colour"]) == 2
    told = capsys.readouterr()
    assert "cells" in told.out
    assert "No such option" in told.err


def test_ranks_but_the_first_are_silent(launched, monkeypatch, capsys):
    launched[0] = Second()
    monkeypatch.setattr("sys.stdout", None)
    assert not ranks.is_spokesman()
    ranks.hush_others()
    console.note("nobody reads this")
    ranks.once(lambda: pytest.fail("only rank 0 does this"))
    assert ranks.run_alone(["compare"], lambda: pytest.fail("rank 0"), lambda error: ("", 1))
    assert not console.Stages(quiet=False).live
    assert capsys.readouterr().err == ""


def test_rank_0_says_that_the_others_wait(launched, monkeypatch, capsys):
    first = Second()
    monkeypatch.setattr(Second, "rank", 0)
    launched[0] = first
    assert ranks.run_alone(["demo"], lambda: None, lambda error: ("", 1)) == ("", 0)
    assert "demo runs on rank 0 alone" in capsys.readouterr().err


def test_ranks_of_a_node_share_its_processors(launched, monkeypatch):
    monkeypatch.delenv("SFCPART_THREADS")
    monkeypatch.setattr("sfcpart.kernels.threads.n_threads", lambda: 8)
    monkeypatch.setenv("MPI_LOCALNRANKS", "3")
    assert local_ranks() == 3
    ranks.share_threads()
    assert os.environ["SFCPART_THREADS"] == "2"
    monkeypatch.setenv("MPI_LOCALNRANKS", "none")
    assert local_ranks() == 1


def test_a_single_process_shares_nothing(monkeypatch):
    monkeypatch.delenv("SFCPART_THREADS", raising=False)
    ranks.share_threads()
    assert "SFCPART_THREADS" not in os.environ
    assert ranks.is_spokesman()
