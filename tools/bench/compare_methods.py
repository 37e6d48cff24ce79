"""All ways to split, measured alike: the tables of "Which method, and why" in DEVELOPERS.md.

    python tools/bench/compare_methods.py reference   # random Delaunay tets, 64 parts, 3 %
    python tools/bench/compare_methods.py layers      # stretched wall layers, mixed cells
    python tools/bench/compare_methods.py cells       # doubling cells at fixed parts
    python tools/bench/compare_methods.py parts       # 16 to 4096 parts of one mesh
    python tools/bench/compare_methods.py tolerance   # balance against cut, in predicted steps
    python tools/bench/compare_methods.py starts      # smoothing of other starts than the curve

`reference`: Delaunay tetrahedra of 160,000 points of `numpy.random.default_rng(0)` (1.08e6 cells).
`layers`: the Skerry Channel with hexahedra at the bed (aspect ratio printed) below wedges, faces
counted and then weighed by measure. Cuts are multiples of that along the Hilbert curve; times
(medians of `--repeat` runs in one process, nothing compiled in them, the cell graph included where
it is needed) multiples of the time to build the cell graph; memory is bytes a cell beyond mesh and
graph; `step` is the predicted time of a step. `tolerance`: the reference mesh again, imbalance, cut
and predicted steps on a slow and a fast network, beside Hilbert's. `cells`, `parts`: jittered
lattices of tets; seconds and, in brackets, processor seconds of all threads (which say more where
other work shares the cores), both without the cell graph; cut; memory. Tables are Markdown.
Targets are printed with what was reached.
"""

from __future__ import annotations

import argparse
import os
import time
from collections.abc import Sequence
from typing import Any

import numpy as np

import sfcpart
from sfcpart.comparison import Comparison
from sfcpart.graph import cell_graph
from sfcpart.kernels.threads import n_threads
from sfcpart.measure import StepModel, assess_partition
from sfcpart.mesh.channel import channel_section
from sfcpart.mesh.mesh import Mesh
from sfcpart.mesh.shape import extrude
from sfcpart.mesh.shapes import jittered_tets
from sfcpart.meter import metered
from sfcpart.methods.registry import METHODS

SLOW = ("spectral",)  # timed once
TOLERANCE = 0.03


def reference(n_points: int) -> Mesh:
    """Make the reference mesh."""
    from scipy.spatial import Delaunay

    points = np.random.default_rng(0).random((n_points, 3))
    return Mesh.from_arrays(points, {"tetra": Delaunay(points).simplices.astype(np.int32)})


def wall_layers(n_along: int) -> tuple[Mesh, float]:
    """Make the channel with 24 thin layers at its bed; return it and its largest aspect ratio."""
    n_layers, growth = 24, 1.5
    section = channel_section(n_along, n_along // 8, n_layers=n_layers, growth=growth)
    across = np.linspace(0.0, 12.0, max(2, n_along * 3 // 10) + 1)
    thinnest = 0.8 * (growth - 1) / (growth**n_layers - 1)
    return extrude(section, across).to_mesh(), 40.0 / n_along / thinnest


def compared(
    mesh: Mesh, n_parts: int, methods: Sequence[str], repeat: int, **wish: Any
) -> dict[str, dict[str, Any]]:
    """Compare the quick methods with repetition, the slow ones without; a row of figures each."""
    rows: dict[str, dict[str, Any]] = {}
    for slow in (False, True):
        names = [name for name in methods if (name in SLOW) == slow]
        if not names:
            continue
        found: Comparison = sfcpart.compare(
            mesh, n_parts, methods=names, tolerance=TOLERANCE, repeat=1 if slow else repeat, **wish
        )
        for row, figures in zip(found.rows, found.figures(), strict=True):
            if row.failure:
                print(f"{row.name}: {row.failure}")
                continue
            rows[row.name] = {**figures, "graph": found.graph_seconds, "n_cells": mesh.n_cells}
    return {name: rows[name] for name in methods if name in rows}


def table(rows: dict[str, dict[str, Any]], *, base: dict[str, Any]) -> None:
    """Print a table of all methods, beside a base."""
    heads = (
        "cut faces",
        "cut measure",
        "halo",
        "imbalance",
        "parts in pieces",
        "meet",
        "step",
        "time",
    )
    print(f"| method | {' | '.join(heads)} | bytes a cell |\n|---|{'---:|' * (len(heads) + 1)}")
    for name, row in rows.items():
        memory = "" if row["peak_bytes"] is None else f"{row['peak_bytes'] / row['n_cells']:.0f}"
        print(
            f"| `{name}` | {row['cut_faces'] / base['cut_faces']:.3f} | "
            f"{row['cut_measure'] / base['cut_measure']:.3f} | "
            f"{row['halo_cells'] / base['halo_cells']:.3f} | {100 * row['imbalance']:.2f} % | "
            f"{row['n_split_parts']} | {row['neighbours_max']} | "
            f"{row['step_seconds'] / base['step_seconds']:.3f} | "
            f"{row['split_seconds'] / row['graph']:.2f} | {memory} |"
        )


def show_reference(methods: Sequence[str], repeat: int, size: int) -> None:
    """Table of the reference mesh, and the targets of the two graph methods."""
    mesh = reference(size)
    rows = compared(mesh, 64, methods, repeat)
    base = rows["hilbert"]
    print(f"{mesh.n_cells:,} tets, 64 parts, {100 * TOLERANCE:g} %: Hilbert cuts ", end="")
    print(f"{base['cut_faces']:,} faces; the cell graph takes {base['graph']:.2f} s\n")
    table(rows, base=base)
    if {"smoothed", "multilevel"} <= set(rows):
        deep, flat = rows["multilevel"], rows["smoothed"]
        graph = base["graph"]
        times = [row["split_seconds"] / graph for row in (deep, flat)]
        cuts = [row["cut_faces"] / base["cut_faces"] for row in (deep, flat)]
        print(
            f"\nmultilevel: cut {cuts[0]:.3f} (target 0.58), {times[0]:.1f} graph times, ", end=""
        )
        print(f"{times[0] - 1:.1f} without the graph (target 10)")
        print(
            f"smoothed: cut {cuts[1]:.3f} (target 0.64), {times[1] / times[0]:.2f} of its ", end=""
        )
        print(f"time, {(times[1] - 1) / (times[0] - 1):.2f} without the graph (target 0.33)")


def show_layers(methods: Sequence[str], repeat: int, size: int) -> None:
    """Tables of the stretched mesh, faces counted and weighed."""
    mesh, aspect = wall_layers(size)
    weighing = [name for name in methods if name in ("smoothed", "multilevel", "spectral")]
    rows = compared(mesh, 64, methods, repeat)
    print(f"{mesh.n_cells:,} hexahedra and wedges, aspect ratio {aspect:,.0f}, 64 parts; ", end="")
    print(f"Hilbert cuts {rows['hilbert']['cut_faces']:,} faces\n")
    table(rows, base=rows["hilbert"])
    print("\nfaces weighed by their measure:\n")
    table(compared(mesh, 64, weighing, repeat, face_weight="measure"), base=rows["hilbert"])


def show_tolerance(methods: Sequence[str], repeat: int, size: int) -> None:
    """Table of what balance costs in cut and gains in steps, for large and for small parts."""
    mesh = reference(size)
    graph = cell_graph(mesh)
    models = [StepModel.from_preset(name) for name in ("gigabit-ethernet", "infiniband-edr")]
    print("| parts | method | tolerance | imbalance | cut | step, gigabit | step, EDR |")
    print("|---:|---|---:|---:|---:|---:|---:|")
    for n_parts in (64, 1024):
        base: list[dict[str, Any]] = []
        for name in methods:
            for tolerance in (0.0, 0.003, 0.01, 0.03) if METHODS[name].needs_graph else (0.0,):
                partition = sfcpart.split(mesh, n_parts, method=name, tolerance=tolerance)
                found = [
                    dict(assess_partition(mesh, graph, partition, step_model=model).total)
                    for model in models
                ]
                base = base or found
                print(f"| {n_parts:,} | `{name}` | {100 * tolerance:g} % | {beside(found, base)} |")


def beside(found: Sequence[dict[str, Any]], base: Sequence[dict[str, Any]]) -> str:
    """Write imbalance, cut and steps of a split beside a base, for each network."""
    steps = [a["step_seconds"] / b["step_seconds"] for a, b in zip(found, base, strict=True)]
    cut = found[0]["cut_faces"] / base[0]["cut_faces"]
    ratios = " | ".join(f"{step:.3f}" for step in steps)
    return f"{100 * found[0]['imbalance']:.2f} % | {cut:.3f} | {ratios}"


def show_starts(methods: Sequence[str], repeat: int, size: int) -> None:
    """Table of what smoothing makes of different starts, on the reference mesh and wall layers."""
    sfcpart.split(jittered_tets((9, 9, 9)).to_mesh(), 8, method="smoothed")  # compiles
    print("| mesh | start | its cut | smoothed | imbalance | parts in pieces | processor seconds |")
    print("|---|---|---:|---:|---:|---:|---:|")
    for label, mesh in (("tets", reference(size)), ("layers", wall_layers(130)[0])):
        graph, base = cell_graph(mesh), 0.0
        starts = [(name, "balanced") for name in methods]
        for name, cuts in [*starts, (methods[0], "least")]:
            start = sfcpart.split(mesh, 64, method=name, cuts=cuts)
            began = time.process_time()
            better = sfcpart.smooth(mesh, start, tolerance=TOLERANCE)
            took = time.process_time() - began
            cut = float(assess_partition(mesh, graph, start).total["cut_faces"] or 0)
            total = dict(assess_partition(mesh, graph, better).total)
            base = base or cut
            print(
                f"| {label} | `{name}`{', least cuts' * (cuts == 'least')} | {cut / base:.3f} | "
                f"{total['cut_faces'] / base:.3f} | "
                f"{100 * total['imbalance']:.2f} % | {total['n_split_parts']} | {took:.2f} |"
            )


def show_cells(methods: Sequence[str], repeat: int, size: int) -> None:
    """Growth with the number of cells, for 64 parts."""
    growth_head("cells", methods)
    for step in range(4):
        side = round((size * 2**step / 6) ** (1 / 3)) | 1  # odd: parts are no neat blocks
        mesh = jittered_tets((side,) * 3).to_mesh()
        growth_row(f"{mesh.n_cells:,}", mesh, 64, methods, repeat)


def show_parts(methods: Sequence[str], repeat: int, size: int) -> None:
    """Growth with the number of parts, for one mesh."""
    mesh = jittered_tets((round((size / 6) ** (1 / 3)) | 1,) * 3).to_mesh()
    print(f"{mesh.n_cells:,} tets\n")
    growth_head("parts", methods)
    for n_parts in (16, 64, 256, 1024, 4096):
        growth_row(f"{n_parts:,}", mesh, n_parts, methods, repeat)


def growth_head(what: str, methods: Sequence[str]) -> None:
    """Print the head of a table of growth, once every method has run on a small mesh."""
    small = jittered_tets((9, 9, 9)).to_mesh()
    for name in methods:
        sfcpart.split(small, 8, method=name, tolerance=TOLERANCE)
    print(f"| {what} | {' | '.join(methods)} |\n|---:|{'---:|' * len(methods)}")


def growth_row(head: str, mesh: Mesh, n_parts: int, methods: Sequence[str], repeat: int) -> None:
    """Print wall and processor seconds without the graph, cut beside Hilbert's, bytes a cell."""
    graph = cell_graph(mesh)
    cells, base = [], 0.0
    for name in methods:
        began = time.process_time()
        partition, took = metered(
            lambda name=name: sfcpart.split(mesh, n_parts, method=name, tolerance=TOLERANCE),
            repeat=repeat,
        )
        processor = (time.process_time() - began) / repeat
        cut = assess_partition(mesh, graph, partition).total["cut_faces"]
        base = base or float(cut or 1)
        memory = "" if took.peak_bytes is None else f", {took.peak_bytes / mesh.n_cells:.0f} B"
        cells.append(
            f"{took.seconds:.2f} s ({processor:.2f}), {float(cut or 0) / base:.2f}{memory}"
        )
    print(f"| {head} | {' | '.join(cells)} |", flush=True)


WHAT = {
    "reference": (show_reference, 160_000, tuple(METHODS)),
    "layers": (show_layers, 130, tuple(METHODS)),
    "tolerance": (show_tolerance, 160_000, ("hilbert", "coordinate", "smoothed", "multilevel")),
    "starts": (show_starts, 160_000, ("hilbert", "coordinate", "inertial")),
    "cells": (show_cells, 250_000, ("hilbert", "smoothed", "multilevel", "coordinate")),
    "parts": (show_parts, 500_000, ("hilbert", "smoothed", "multilevel", "coordinate")),
}


def main() -> None:
    parser = argparse.ArgumentParser(
        description=__doc__, formatter_class=argparse.RawDescriptionHelpFormatter
    )
    parser.add_argument("what", choices=WHAT)
    parser.add_argument("--repeat", type=int, default=3)
    parser.add_argument("--size", type=int, help="points, columns along the channel, or cells")
    parser.add_argument("--methods", nargs="+", choices=METHODS, metavar="NAME")
    asked = parser.parse_args()
    show, size, methods = WHAT[asked.what]
    chosen = asked.methods or methods
    if "hilbert" not in chosen:
        chosen = ("hilbert", *chosen)
    print(f"{n_threads()} threads, load {os.getloadavg()[0]:.1f}, repeat {asked.repeat}\n")
    show(chosen, asked.repeat, asked.size or size)


if __name__ == "__main__":
    main()
