"""What is printed reads well: one cell, no rounding noise, no figures that do not exist."""

from __future__ import annotations

import meshio
import numpy as np
import pytest

from sfcpart.cli.figures import counted, percent


def write_surface(path):
    """Write two triangles that stand in space."""
    points = [[0, 0, 0], [1, 0, 0], [1, 1, 1], [0, 1, 0]]
    meshio.Mesh(points, {"triangle": [[0, 1, 2], [0, 2, 3]]}).write(path)


def test_one_is_singular_and_thousands_are_parted():
    assert counted(1, "cell") == "1 cell"
    assert counted(0, "face") == "0 faces"
    assert counted(2784, "part") == "2,784 parts"
    assert percent(0.0312) == "3.12 %"
    assert percent(79.2) == "7,920 %"
    assert percent(None) == "-"


def test_a_surface_in_space_has_no_least_surface_to_compare_with(sfcpart):
    write_surface("sheet.vtk")
    out = sfcpart("split sheet.vtk -n 2").out
    assert "surface - times" not in out
    assert "\nshape      stretch at most" in out
    assert "smallest interface 1 face\n" in out
    assert sfcpart("split sheet.vtk -n 1").out.startswith("sheet.vtk: 2 cells into 1 part by")


def test_parts_of_different_speed_show_no_rounding(sfcpart):
    out = sfcpart("split meshes/channel_mixed.vtu -n 4 --speeds 2*1,2*0.5").out
    assert "no part of 4 carries more than its fair share" in " ".join(out.split())


def test_a_file_is_named_once(sfcpart):
    np.save("odd.npy", np.zeros(2784, complex))
    err = sfcpart("assess meshes/channel_mixed.vtu odd.npy").err
    assert err == "sfcpart: error: odd.npy: holds complex128 values; wanted integers or reals\n"


def test_a_full_folder_is_refused_by_a_name_that_a_listing_shows(sfcpart):
    sfcpart("split meshes/turbine.vtu -n 2 -o parts -q")
    assert (
        "holds something already (cell_part.npy);"
        in sfcpart("split meshes/turbine.vtu -n 2 -o parts -q").err
    )


@pytest.mark.parametrize("spec", ["''", "work*"])
def test_weights_of_nothing_are_told_apart(sfcpart, spec):
    code, _, err = sfcpart(f"split meshes/channel_mixed.vtu -n 2 -w {spec}")
    assert code == 3
    assert ("beside" in err) == (spec == "work*")


def test_products_that_overflow_are_refused_in_one_line(sfcpart):
    wide = "tetra=1e300,other=1"
    code, _, err = sfcpart(f"split meshes/channel_mixed.vtu -n 2 -w {wide}*{wide}")
    assert code == 3
    assert err == "sfcpart: error: cell 864 has weight inf; wanted finite numbers >= 0\n"


def test_no_number_and_no_name_is_cut_short(sfcpart):
    name = "a_field_with_a_name_that_is_much_too_long_for_a_terminal_of_eighty_columns_in_width"
    mesh = meshio.read("meshes/pier_shell.vtk")
    cells = [np.ones(len(block.data)) for block in mesh.cells]
    meshio.Mesh(mesh.points, mesh.cells, cell_data={name: cells}).write("long.vtk")
    out = sfcpart("inspect long.vtk").out
    assert "\u2026" not in out
    row = next(line for line in out.splitlines() if line.startswith(name))
    assert row.split()[1:] == ["float64", "1", "1", f"{sum(map(len, cells)):,}", "yes"]
