"""`sfcpart split`, `assess`, `compare`, `inspect`, `figures`, `demo`: what they print and write."""

from __future__ import annotations

import csv
import json
import re
from itertools import pairwise
from pathlib import Path

import meshio
import numpy as np
import pytest

import sfcpart as api
from sfcpart.files.meshes.faces_file import write_faces
from sfcpart.mesh.refined import refined_box


def test_split_writes_what_it_says_and_says_what_it_wrote(sfcpart, tmp_path):
    code, out, err = sfcpart("split meshes/channel_mixed.vtu --parts 8 -o parts --picture")
    assert (code, err) == (0, "")
    first = out.splitlines()[0]
    assert first == "meshes/channel_mixed.vtu: 2,784 cells into 8 parts by hilbert"
    written = {entry.name for entry in (tmp_path / "parts").iterdir() if entry.name[0] != "."}
    assert written == {"parts.vtkhdf", "parts.csv", "summary.json", "parts.png", "cell_part.npy"}
    told = out.partition("written to parts: ")[2].replace(",", " ").split()
    assert set(told) == written
    rows = list(csv.DictReader((tmp_path / "parts" / "parts.csv").open()))
    assert [int(row["cells"]) for row in rows] == [348] * 8
    summary = json.loads((tmp_path / "parts" / "summary.json").read_text())
    assert summary["total"]["n_cells"] == 2784
    assert summary["options"]["method"] == "hilbert"
    assert summary["input"]["digest"].startswith("sha256:")


def test_split_is_the_api_call(sfcpart, meshes):
    sfcpart("split meshes/channel_mixed.vtu --levels 2x3 --weight work --seed 4 -o parts -q")
    mesh = api.read_mesh(meshes / "channel_mixed.vtu")
    same = api.split(mesh, 6, levels=(2, 3), weights="work", seed=4)
    assert np.load("parts/cell_part.npy").tolist() == same.cell_part.tolist()


def test_output_in_a_pipe_is_plain_and_narrow(sfcpart):
    out = sfcpart("split meshes/channel_mixed.vtu -n 32 --weight work --limit memory:200").out
    assert "\x1b" not in out
    assert "the 12 slowest of 32 parts" in out
    assert max(map(len, out.splitlines())) <= 80
    assert not any(line != line.rstrip() for line in out.splitlines())


def test_json_is_json_and_nothing_else(sfcpart):
    code, out, err = sfcpart("split meshes/channel_section.msh -n 4 --json")
    told = json.loads(out)
    assert (code, err) == (0, "")
    assert told["mesh"] == "meshes/channel_section.msh"
    assert told["output"] is None
    assert told["total"]["n_parts"] == 4
    assert told["part"]["cells"] == [206] * 4


def test_quiet_prints_nothing(sfcpart):
    assert sfcpart("split meshes/turbine.vtu -n 3 -o parts --quiet") == (0, "", "")


def test_output_in_the_inputs_own_format_and_as_pieces(sfcpart, tmp_path):
    line = "split meshes/channel_mixed.vtu -n 3 -o parts --format same --format vtu"
    assert sfcpart(line).code == 0
    names = {entry.name for entry in (tmp_path / "parts").rglob("*")}
    assert "parts.pvtu" in names
    back = api.read_mesh("parts/parts.vtu")
    assert back.cell_fields["part"].tolist() == np.load("parts/cell_part.npy").tolist()


def test_own_format_of_vtkhdf_stands_beside_what_the_solver_loads(sfcpart, tmp_path):
    line = "split meshes/kelvin_cells.vtkhdf -n 3 -o parts --format same --format vtkhdf"
    code, _, err = sfcpart(line)
    assert (code, err) == (0, "")
    part = np.load("parts/cell_part.npy")
    assert api.read_mesh("parts/mesh.vtkhdf").cell_fields["part"].tolist() == part.tolist()
    assert api.read_part("parts", 2).n_owned == np.sum(part == 2)


def test_own_format_of_a_file_of_faces(sfcpart, tmp_path):
    write_faces(tmp_path / "a.h5", refined_box(4).to_mesh())
    assert sfcpart("split a.h5 -n 4 -o parts --format same -q") == (0, "", "")
    mesh = api.read_mesh("parts/parts.h5")
    assert mesh.cell_fields["part"].tolist() == np.load("parts/cell_part.npy").tolist()


def test_speeds_shift_the_work(sfcpart):
    told = json.loads(sfcpart("split meshes/channel_mixed.vtu -n 4 --speeds 2*1,2*0.5 --json").out)
    assert told["part"]["cells"] == [928, 928, 464, 464]
    Path("speeds.txt").write_text("1\n1\n0.5\n0.5\n")
    again = json.loads(
        sfcpart("split meshes/channel_mixed.vtu -n 4 --speeds speeds.txt --json").out
    )
    assert again["part"]["cells"] == told["part"]["cells"]


def test_least_cuts_use_the_tolerance_up(sfcpart):
    command = "split meshes/channel_mixed.vtu -n 7 --json --tolerance 0.05"
    plain, least = (
        json.loads(sfcpart(f"{command} {more}")[1])["total"] for more in ("", "--cuts least")
    )
    assert least["cut_faces"] < plain["cut_faces"]
    assert plain["imbalance"] < least["imbalance"] <= 0.05


def test_cells_kept_together_stay_together(sfcpart):
    Path("pairs.txt").write_text("0 2783\n5 1000\n")
    sfcpart("split meshes/channel_mixed.vtu -n 5 --pairs pairs.txt --together row -o parts -q")
    part = np.load("parts/cell_part.npy")
    assert part[0] == part[2783]
    assert part[5] == part[1000]
    row = api.read_mesh("meshes/channel_mixed.vtu").cell_fields["row"]
    for value in np.unique(row):
        assert len(np.unique(part[row == value])) == 1


def cells_behind(mesh, name: str) -> np.ndarray:
    """Return the cell behind each edge of a boundary group, from the lowest edge to the highest."""
    group = next(group for group in mesh.boundary if group.name == name)
    rows = [set(mesh.indices[a:b].tolist()) for a, b in pairwise(mesh.indptr)]
    edges = group.indices.reshape(-1, 2)
    height = mesh.points[edges, 1].mean(axis=1)
    return np.array(
        [
            next(cell for cell, points in enumerate(rows) if points.issuperset(edge))
            for edge in edges[np.argsort(height)].tolist()
        ]
    )


@pytest.mark.parametrize("weight", ["", "--weight triangle=1,quad=40"])
def test_periodic_groups_stay_together(sfcpart, weight):
    line = "split meshes/channel_section.msh -n 4 --periodic inflow:outflow -o parts -q"
    assert sfcpart(f"{line} {weight}") == (0, "", "")
    mesh = api.read_mesh("meshes/channel_section.msh")
    part = np.load("parts/cell_part.npy")
    inflow, outflow = cells_behind(mesh, "inflow"), cells_behind(mesh, "outflow")
    assert len(inflow) == len(outflow) == 14
    assert part[inflow].tolist() == part[outflow].tolist()
    alone = api.split(mesh, 4).cell_part  # without being asked they are apart
    assert alone[inflow].tolist() != alone[outflow].tolist()


@pytest.mark.parametrize("across", ["faces", "points"])
def test_halo_options_reach_the_files(sfcpart, across):
    sfcpart(f"split meshes/kelvin_cells.vtkhdf -n 3 --layers 2 --across {across} -o parts -q")
    part = api.read_part("parts", 1)
    assert (part.layers, part.across) == (2, across)


def test_overwrite_replaces_only_when_asked(sfcpart):
    line = "split meshes/turbine.vtu -n 3 -o parts -q"
    assert sfcpart(line).code == 0
    refused = sfcpart(line)
    assert refused.code == 4
    assert "holds something already" in refused.err
    assert sfcpart(f"{line} --overwrite").code == 0


def test_assess_takes_fields_files_and_folders(sfcpart):
    split = json.loads(sfcpart("split meshes/channel_mixed.vtu -n 5 -o parts --json").out)
    np.savetxt("parts.txt", np.load("parts/cell_part.npy"), fmt="%d")
    for source in ("parts", "parts/cell_part.npy", "parts.txt"):
        told = json.loads(sfcpart(f"assess meshes/channel_mixed.vtu {source} --json").out)
        assert told["total"] == split["total"]
    body = json.loads(sfcpart("assess meshes/turbine.vtu --field body --json").out)
    assert body["part"]["cells"] == [960, 48]
    assert body["total"]["cut_faces"] == 0


def test_assess_measures_with_the_same_weights_speeds_and_limits(sfcpart):
    load = "--weight work --speeds 1,2,1 --limit memory:1500 --json"
    split = json.loads(sfcpart(f"split meshes/channel_mixed.vtu -n 3 -o parts {load}").out)
    again = json.loads(sfcpart(f"assess meshes/channel_mixed.vtu parts {load}").out)
    assert again["total"] == split["total"]
    assert again["part"] == split["part"]
    assert 0.5 < again["total"]["limit_share"] <= 1.0


def test_assess_writes_csv_and_picture(sfcpart, tmp_path):
    code, out, _ = sfcpart("assess meshes/turbine.vtu --field body --csv a.csv --picture a.png")
    assert code == 0
    assert out.startswith("meshes/turbine.vtu: 1,008 cells in 2 parts\nThe work is unevenly shared")
    assert "carries 90.5 % more than its fair share" in " ".join(out.split())
    rows = list(csv.DictReader((tmp_path / "a.csv").open()))
    assert [row["cells"] for row in rows] == ["960", "48"]
    assert (tmp_path / "a.png").read_bytes()[:4] == b"\x89PNG"


def test_own_network_changes_the_predicted_step(sfcpart):
    line = "split meshes/channel_mixed.vtu -n 8 --json"
    fast = json.loads(sfcpart(line).out)
    slow = json.loads(sfcpart(f"{line} --network gigabit-ethernet").out)
    own = json.loads(sfcpart(f"{line} --latency 1 --bandwidth 1e9 --exchanges 1").out)
    assert slow["total"]["step_seconds"] > fast["total"]["step_seconds"]
    assert own["total"]["step_seconds"] > max(own["part"]["neighbours"])
    assert own["step_model"]["network"] == "own"


def test_demo_needs_nothing_and_says_what_is_next(sfcpart, tmp_path):
    code, out, err = sfcpart("demo")
    assert (code, err) == (0, "")
    assert "Next:" in out
    part = api.read_part("sfcpart-demo", 15)
    assert part.n_parts == 16
    assert {"parts.png", "parts.csv", "summary.json"} <= {
        entry.name for entry in (tmp_path / "sfcpart-demo").iterdir()
    }
    assert sfcpart("demo -q") == (0, "", "")


def test_compare_measures_all_alike(sfcpart, tmp_path):
    line = "compare meshes/turbine.vtu -n 2 --method hilbert --method rows --given bodies:body"
    told = json.loads(sfcpart(f"{line} --json --csv all.csv").out)
    rows = {row["name"]: row for row in told["rows"]}
    assert list(rows) == ["hilbert", "rows", "bodies"]
    alone = json.loads(sfcpart("split meshes/turbine.vtu -n 2 --json").out)
    assert rows["hilbert"]["cut_faces"] == alone["total"]["cut_faces"]
    assert rows["bodies"]["cut_faces"] == 0
    assert told["best"]["cut_faces"] == ["bodies"]
    with (tmp_path / "all.csv").open() as file:
        table = list(csv.DictReader(file))
    assert [row["name"] for row in table] == list(rows)
    assert [row["cut_faces"] for row in table] == [str(r["cut_faces"]) for r in told["rows"]]


def test_compare_marks_the_best_and_names_the_shortest_run(sfcpart):
    out = sfcpart("compare meshes/turbine.vtu -n 2 -m hilbert --given bodies:body").out
    lines = {line.split()[0]: line for line in out.splitlines() if line}
    assert "0*" in lines["bodies"].split()
    assert "0*" not in lines["hilbert"].split()[3:4]
    assert re.search(r"shortest +predicted run of 10,000 steps: hilbert", out)
    assert max(map(len, out.splitlines())) <= 80


def test_compare_of_all_methods_fits_the_width(sfcpart):
    out = sfcpart("compare meshes/channel_mixed.vtu -n 8 --weight work").out
    assert "\u2026" not in out  # nothing is cut off
    assert max(map(len, out.splitlines())) <= 80


def test_compare_says_why_a_method_cannot(sfcpart):
    line = "compare meshes/turbine.vtu -n 2 -m hilbert --limit body:20 --together body"
    code, out, _ = sfcpart(line)
    assert code == 0
    assert "hilbert" in out
    assert "limit" in out


def test_inspect_tells_what_is_there(sfcpart):
    out = sfcpart("inspect meshes/channel_section.msh").out
    assert "608 triangle, 216 quad" in out
    assert "bed (60), surface (40), inflow (14), outflow (14)" in out
    assert "324.3448249 in all" in out
    assert "all cells connected" in out
    assert "gmsh:physical" in out
    told = json.loads(sfcpart("inspect meshes/turbine.vtu --json").out)
    assert told["component_size"] == [960, 48]
    assert told["kinds"] == {"hexahedron": 984, "wedge": 24}


def test_inspect_finds_cracks_and_merging_closes_them(sfcpart):
    points = np.array([[0.0, 0, 0], [1, 0, 0], [0, 1, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0]])
    meshio.Mesh(points, [("triangle", [[0, 1, 2], [3, 4, 5]])]).write("a.vtu")
    cracked = json.loads(sfcpart("inspect a.vtu --json").out)
    assert cracked["cracks"]["n_faces"] == 1
    assert "merge points" in " ".join(sfcpart("inspect a.vtu").out.split())
    closed = json.loads(sfcpart("inspect a.vtu --merge-points 1e-6 --json").out)
    assert (closed["cracks"]["n_faces"], closed["n_inner_faces"]) == (0, 1)
    split = json.loads(sfcpart("split a.vtu -n 2 --merge-points 1e-6 --json").out)
    assert split["total"]["cut_faces"] == 1


def test_figures_explains_every_key_of_the_json(sfcpart):
    told = json.loads(sfcpart("split meshes/turbine.vtu -n 2 --json").out)
    out = sfcpart("figures").out
    for name in (*told["part"], *told["total"]):
        assert re.search(rf"^{name} ", out, re.M)
    some = sfcpart("figures pieces").out
    assert some.splitlines()[0] == "Of each part"
    assert len(some.splitlines()) <= 3
    listed = json.loads(sfcpart("figures --json").out)
    assert [column["name"] for column in listed["part"]] == list(told["part"])
