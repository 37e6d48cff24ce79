"""Figures of re-splitting: shifted cuts, new names, priced smoothing over a swept front.

    python tools/bench/rebalance.py shift [--cells 10000000] [--parts 64]
    python tools/bench/rebalance.py relabel [--cells 1000000] [--parts 4096] [--method coordinate]
    python tools/bench/rebalance.py front [--size 12] [--frames 60] [--parts 64] [--ways smooth]

Processor seconds of all threads, kernels compiled before. `shift`: random centres (the worst file
order), weights that peak in a slab which drifts; the curve order is kept. `relabel`: old and new
split with different weights. `front`: the series of `tools/series`; each frame is re-split from
the one before; against a multilevel split of the same frame from scratch.
"""

from __future__ import annotations

import argparse
import time
from collections.abc import Callable
from dataclasses import replace

import numpy as np

from sfcpart.curve import curve_slice
from sfcpart.graph import cell_graph
from sfcpart.mesh.mesh import Mesh
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS
from sfcpart.partition import Partition
from sfcpart.plan import plan_problem
from sfcpart.resplit.origin import home_parts
from sfcpart.resplit.overlap import Overlap
from sfcpart.resplit.relabel import best_labels
from sfcpart.resplit.task import Task
from sfcpart.resplit.ways import WAYS
from tools.series.front import front_series


def timed(call: Callable, rounds: int = 3) -> tuple[float, object]:
    """Return the least processor time of a few rounds after one to warm up, and the result."""
    best, result = float("inf"), call()
    for _ in range(rounds):
        began = time.process_time()
        result = call()
        best = min(best, time.process_time() - began)
    return best, result


def problem_of(mesh: Mesh, n_parts: int, weights: object) -> Problem:
    """Plan with defaults."""
    return plan_problem(
        mesh, n_parts, tolerance=0.03, weights=weights, speeds=None, limit_weights=None,
        limits=None, levels=None, together=None, pairs=None, periodic=(), face_weight="count",
        seed=0,
    )  # fmt: skip


def peak(x: np.ndarray, at: float) -> np.ndarray:
    """Return weights from 1 to 4 that peak in a slab."""
    return 1.0 + 3.0 * np.exp(-(((x - at) / 0.1) ** 2))


def shift(given: argparse.Namespace) -> None:
    centers = np.random.default_rng(0).random((given.cells, 3))
    mesh, x = Mesh.from_centers(centers), centers[:, 0]
    old = METHODS["hilbert"].run(problem_of(mesh, given.parts, peak(x, 0.5)))
    print("drift  first split  shift  ratio  moved  times least  heaviest")
    for drift in (0.002, 0.01, 0.05):
        problem = problem_of(mesh, given.parts, peak(x, 0.5 + drift))
        first, _ = timed(lambda p=problem: METHODS["hilbert"].run(replace(p, place=curve_slice)))
        task = Task(problem, old, given.parts)
        took, new = timed(lambda t=task: WAYS["shift"].run(t))
        moved = task.migration(new)
        heaviest = np.bincount(new, weights=problem.weight).max() * given.parts / task.total
        print(
            f"{drift:5.3f} {first:10.3f} s {took:6.3f} {took / first:6.3f} {moved.moved_share:6.3f}"
            f" {moved.times_least or 1.0:8.2f} {heaviest:13.4f}"
        )


def relabel(given: argparse.Namespace) -> None:
    side = round(given.cells ** (1 / 3))
    corner = np.stack(np.meshgrid(*[np.arange(side)] * 3, indexing="ij"), -1).reshape(-1, 3)
    centers = (corner + 0.5 * np.random.default_rng(0).random(corner.shape)) / side
    mesh, n_parts = Mesh.from_centers(centers), given.parts
    old = METHODS["hilbert"].run(problem_of(mesh, n_parts, peak(centers[:, 0], 0.4)))
    problem = problem_of(mesh, n_parts, peak(centers[:, 0], 0.6))
    problem = replace(problem, place=curve_slice)
    split, new = timed(lambda: METHODS[given.method].run(problem), rounds=1)
    shared = {"n_old_parts": n_parts, "n_parts": n_parts, "weight": problem.weight}
    count, overlap = timed(lambda: Overlap.of(old, new, **shared))
    for keep in ("total", "busiest"):
        name, label = timed(lambda k=keep: best_labels(overlap, keep=k))
        stays = overlap.weight[label[overlap.new] == overlap.old].sum() / overlap.weight.sum()
        print(
            f"{given.method}, {len(centers)} cells, {n_parts} parts: split {split:.3f} s, overlap "
            f"{count:.3f} ({len(overlap.old)} pairs), names ({keep}) {name:.3f}; names "
            f"{name / split:.3f}, all {(name + count) / split:.3f} of the split; "
            f"{stays:.3f} of the work stays"
        )


def cut_faces(mesh: Mesh, part: np.ndarray) -> int:
    """Count the faces between parts."""
    graph = cell_graph(mesh)
    row = np.repeat(part, np.diff(graph.indptr))
    return int(np.count_nonzero(row != part[graph.indices])) // 2


def front(given: argparse.Namespace) -> None:
    names, current = given.ways.split(","), {}
    rows: dict[str, list[tuple[float, ...]]] = {name: [] for name in names}
    for k, frame in enumerate(front_series(given.size, n_frames=given.frames, steps=given.steps)):
        if k < given.first or k > given.last:
            continue
        mesh, problem = frame.mesh, problem_of(frame.mesh, given.parts, frame.weight)
        fresh = METHODS["multilevel"].run(problem)
        for name in names:
            if name not in current:
                current[name] = fresh
                continue
            old = Partition.from_array(current[name], given.parts)
            home = home_parts(old, mesh.n_cells, parent=frame.parent)
            task = Task(problem, home, given.parts, steps=frame.steps)
            began = time.process_time()
            new = current[name] = WAYS[name].run(task)
            took = time.process_time() - began
            moved, cut = task.migration(new), cut_faces(mesh, new) / cut_faces(mesh, fresh)
            size = np.bincount(new, minlength=given.parts)
            row = moved.times_least or 1.0, cut, moved.moved_share, size.max() / size.mean(), took
            rows[name].append(row)
            print(f"{k:3} {mesh.n_cells:8} {name:8}" + "".join(f"{x:9.3f}" for x in row))
    print("mean: times least, cut / multilevel, moved share, heaviest, processor seconds")
    for name, table in rows.items():
        print(f"{name:8}" + "".join(f"{x:9.3f}" for x in np.mean(table, axis=0)))


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    verbs = parser.add_subparsers(dest="verb", required=True)
    for name, cells, parts in (("shift", 10_000_000, 64), ("relabel", 1_000_000, 4096)):
        verb = verbs.add_parser(name)
        verb.add_argument("--cells", type=int, default=cells)
        verb.add_argument("--parts", type=int, default=parts)
    verb.add_argument("--method", default="coordinate")
    verb = verbs.add_parser("front")
    for name, value in (("size", 12), ("frames", 60), ("parts", 64), ("steps", 10), ("first", 0)):
        verb.add_argument(f"--{name}", type=int, default=value)
    verb.add_argument("--last", type=int, default=10**9)
    verb.add_argument("--ways", default="smooth")
    given = parser.parse_args()
    {"shift": shift, "relabel": relabel, "front": front}[given.verb](given)


if __name__ == "__main__":
    main()
