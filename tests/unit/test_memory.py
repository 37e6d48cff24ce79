"""Whether there is memory enough is asked before the work."""

from __future__ import annotations

import resource

import numpy as np
import pytest

import sfcpart
from sfcpart import memory
from sfcpart.errors import InsufficientMemoryError
from sfcpart.mesh.shapes import lattice


@pytest.fixture
def machine(tmp_path, monkeypatch):
    """Give a function that stands files of a machine in place of the system's."""

    def stand_in(**files: str) -> None:
        for name, text in files.items():
            place = tmp_path / name.replace("__", "/")
            place.parent.mkdir(parents=True, exist_ok=True)
            place.write_text(text)

    (tmp_path / "proc").mkdir()
    monkeypatch.setattr(memory, "_PROC", tmp_path / "proc")
    monkeypatch.setattr(memory, "_GROUPS", tmp_path / "groups")
    monkeypatch.setattr(resource, "getrlimit", lambda _: (resource.RLIM_INFINITY,) * 2)
    return stand_in


FREE = "MemTotal: 900 kB\nMemAvailable:    500 kB\nSwapFree:   100 kB\n"


def test_memory_available_and_free_swap_are_left(machine):
    machine(proc__meminfo=FREE)
    assert memory.memory_left() == 600 * 1024


def test_a_control_group_may_leave_less(machine):
    machine(proc__meminfo=FREE, proc__self__cgroup="0::/job\n")
    place = "groups__job__memory."
    machine(**{f"{place}max": "300000", f"{place}current": "250000"})
    assert memory.memory_left() == 50_000
    machine(**{f"{place}stat": "anon 9\ninactive_file 20000\n"})
    assert memory.memory_left() == 70_000  # copies of files can be given back
    machine(**{f"{place}max": "max"})
    assert memory.memory_left() == 600 * 1024


def test_control_groups_of_version_1_count_too(machine):
    machine(proc__meminfo=FREE, proc__self__cgroup="9:pids:/\n4:cpu,memory:/a\n0::/\n")
    place = "groups__memory__memory."
    machine(**{f"{place}limit_in_bytes": "40000", f"{place}usage_in_bytes": "50000"})
    assert memory.memory_left() == 0


def test_a_limit_on_the_process_counts_too(machine, monkeypatch):
    machine(proc__meminfo=FREE, proc__self__status="VmSize: 100 kB\nVmRSS: 30 kB\n")
    monkeypatch.setattr(resource, "getrlimit", lambda _: (150 * 1024, 150 * 1024))
    assert memory.memory_left() == 50 * 1024
    assert memory.resident_memory() == 30 * 1024


def test_other_systems_refuse_nothing(machine):
    assert memory.memory_left() is None
    memory.check_memory(10**30, "a")


def test_what_the_process_holds_already_is_not_asked_for_again(machine):
    machine(proc__meminfo=FREE, proc__self__status="VmRSS: 400 kB\n")
    memory.check_memory(1150 * 1024, "a")  # estimates are a little high
    with pytest.raises(InsufficientMemoryError, match="a: a split needs about"):
        memory.check_memory(1200 * 1024, "a")
    memory.check_memory(None, "a")


def test_this_machine_has_some():
    assert memory.memory_left() > 10_000_000
    assert memory.resident_memory() > 10_000_000


def test_vtkhdf_tells_before_it_is_read_about_what_the_mesh_tells(tmp_path):
    mesh = lattice((12, 9, 7)).to_mesh().with_cell_field("work", np.ones((756, 3)))
    sfcpart.write_split(tmp_path / "a", mesh, sfcpart.split(mesh, 1))
    path = tmp_path / "a" / "parts.vtkhdf"
    read = sfcpart.read_mesh(path)
    before, after = memory.memory_for_file(path), memory.memory_for_mesh(read)
    base = memory.memory_for_mesh(sfcpart.Mesh.from_centers([[0.0, 0.0]]))
    assert before - base == pytest.approx(after - base, rel=0.02)


@pytest.mark.parametrize(("name", "known"), [("kelvin_cells.vtkhdf", True), ("turbine.vtu", False)])
def test_polyhedra_are_counted_and_other_formats_are_not(root, name, known):
    path = root / "meshes" / name
    found = memory.memory_for_file(path)
    if known:
        mesh = sfcpart.read_mesh(path)
        base = memory.memory_for_mesh(sfcpart.Mesh.from_centers([[0.0, 0.0]]))
        ratio = (found - base) / (memory.memory_for_mesh(mesh) - base)
        assert 0.9 < ratio < 1.5
    else:
        assert found is None
