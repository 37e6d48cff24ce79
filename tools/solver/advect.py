"""A dye cloud drifts through the Skerry Channel (invented) on a mesh that follows its front.

    mpiexec -n 4 python tools/solver/advect.py [--dim 3] [--steps 200] [--json]

An explicit finite-volume solver of advection and diffusion on quadtrees or octrees with hanging
nodes, written on `sfcpart.parallel` and mpi4py alone. It refines where the dye changes fast and
coarsens behind, splits again by the work of the cells when it is time, moves every cell and goes
on. Its fields are the same bits on any number of ranks; dye is conserved to rounding. What it
prints: cells, balance, the dye at the beginning and end, and the seconds of the slowest rank in the
halo exchange, in splitting, in migration, in adapting and in computing.

A partition changes nothing here but the time: it says nothing about whether a simulation is right.
"""

from __future__ import annotations

import argparse
import json
import sys
import time
from collections import defaultdict
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np
from adapt import adapted, wishes
from flow import Channel, Flow, work_of
from forest import Forest
from mpi4py import MPI

from sfcpart import RebalanceClock
from sfcpart.parallel import ending_together, migrate, split_local


@dataclass
class Watch:
    """Adds up the seconds spent on each kind of work."""

    seconds: dict = field(default_factory=lambda: defaultdict(float))

    @contextmanager
    def __call__(self, what: str):
        """Add the seconds of a block."""
        began = time.perf_counter()
        yield
        self.seconds[what] += time.perf_counter() - began


def is_time_to_split(solver: Solver, *, computed: float, remade: bool) -> bool:
    """Decide after a step whether to split again: the one place to ask another policy.

    `computed` are the seconds this rank computed, `remade` tells whether the mesh has just changed.
    """
    if solver.clock is not None:
        return solver.clock.after_step(computed)
    return remade and solver.imbalance() > solver.given.tolerance


class Solver:
    """The cells of this rank, and what has been done to them."""

    def __init__(self, given: argparse.Namespace, world: MPI.Intracomm) -> None:
        shape = tuple(given.shape) or ((8, 4) if given.dim == 2 else (6, 3, 2))
        self.given, self.world, self.watch = given, world, Watch()
        self.forest = Forest(shape, given.levels)
        self.channel = Channel.of(self.forest)
        self.splits, self.moved, self.remade, self.balance = 0, 0, 0, []
        self.clock = None
        cells = self.forest.roots(world.rank, world.size)
        cells["born"] = np.zeros(len(cells["gid"]), np.int32)
        self.cells = self._with_cloud(cells)
        for _ in range(self.forest.deepest):
            self.adapt(0)
            self.cells = self._with_cloud(self.cells)
        self.split()
        if given.policy == "clock":
            self.clock = RebalanceClock(
                world, cost=self.watch.seconds["split"], n_steps=given.steps
            )

    def _with_cloud(self, cells: dict) -> dict:
        """Put the first dye into the cells."""
        return {**cells, "dye": self.channel.cloud(cells), "bound": np.zeros(len(cells["gid"]))}

    def total(self, values: np.ndarray) -> float:
        """Add up a value over the cells of all ranks."""
        return self.world.allreduce(float(values.sum()))

    def dye_there_is(self) -> float:
        """Return all dye, dissolved and bound."""
        both = self.cells["dye"] + self.cells["bound"]
        return self.total(both * self.forest.volume(self.cells["level"]))

    def adapt(self, step: int) -> None:
        """Refine and coarsen by one level."""
        with self.watch("adapt"):
            fine, coarse = (0.05, 0.01) if step else (0.01, 0.0)  # a cloud is seen from afar
            wish = wishes(self.forest, self.cells, self.world, fine=fine, coarse=coarse)
            self.cells, made = adapted(self.forest, self.cells, wish, self.world, step=step)
        self.remade += made if step else 0

    def imbalance(self) -> float:
        """Return by how much the rank with the most work exceeds the mean."""
        mine = float(work_of(self.cells).sum())
        most = self.world.allreduce(mine, op=MPI.MAX)
        return most * self.world.size / self.world.allreduce(mine) - 1

    def split(self) -> None:
        """Split by the present work, and move every cell to its rank."""
        before, began = self.imbalance(), time.perf_counter()
        with self.watch("split" if self.splits else "first split"):  # which loads the library
            rank = split_local(
                self.forest.center(self.cells),
                weights=work_of(self.cells),
                cell_gid=self.cells["gid"],
                comm=self.world,
            )
        self.moved += int(np.count_nonzero(rank != self.world.rank))
        with self.watch("migration"):
            self.cells = migrate(self.cells, destination=rank, comm=self.world, order_by="gid")
        if self.clock is not None:
            self.clock.after_resplit(time.perf_counter() - began)
        if self.splits:
            self.balance.append((before, self.imbalance()))
        self.splits += 1

    def run(self) -> None:
        """Take all steps; adapt now and then, and split again when it is time."""
        flow, remade = self.set_up(), False
        for step in range(self.given.steps):
            before = self.watch.seconds["flow"]
            flow.advance(self.cells, time=step * self.channel.step, watch=self.watch)
            computed = self.watch.seconds["flow"] - before
            remade = (step + 1) % self.given.every == 0
            if remade:
                self.adapt(step + 1)
            split = is_time_to_split(self, computed=computed, remade=remade)
            if split:
                self.split()
            if remade or split:
                flow = self.set_up()

    def set_up(self) -> Flow:
        """Find faces and halo of the present cells."""
        with self.watch("setting up"):
            return Flow(self.channel, self.cells, self.world)

    def report(self, dye_before: float, seconds: float) -> dict:
        """Collect what there is to tell; all ranks together."""
        world, cells = self.world, self.cells
        levels = np.bincount(cells["level"], minlength=self.forest.deepest + 1)
        spent = sorted(set().union(*world.allgather(set(self.watch.seconds))))
        before, after = zip(*self.balance, strict=True) if self.balance else ((0.0,), (0.0,))
        return {
            "ranks": world.size,
            "dim": self.forest.dim,
            "steps": self.given.steps,
            "cells": world.allreduce(len(cells["gid"])),
            "cells_of_level": world.allreduce(levels).tolist(),
            "cells_made_anew": world.allreduce(self.remade),
            "splits": self.splits,
            "cells_moved": world.allreduce(self.moved),
            "imbalance_before_splits": max(before),
            "imbalance_left": max(after),
            "dye_before": dye_before,
            "dye_after": self.dye_there_is(),
            "checksum": f"{sum(world.allgather(checksum(cells))) % (1 << 64):016x}",
            "seconds": seconds,
            "seconds_of_slowest_rank": {
                name: world.allreduce(self.watch.seconds[name], op=MPI.MAX) for name in spent
            },
        }


def checksum(cells: dict) -> int:
    """Return a checksum of all cells whatever their order and ranks: a sum of mixed words."""
    words = [cells["gid"], cells["level"].astype(np.int64), cells["born"].astype(np.int64)]
    words += [cells[name].view(np.int64) for name in ("dye", "bound")]
    mixed = np.zeros(len(cells["gid"]), np.uint64)
    for word in words:  # multiply and shift: G. Steele et al., OOPSLA (2014), from memory
        mixed = (mixed ^ word.view(np.uint64)) * np.uint64(0xBF58476D1CE4E5B9)
        mixed ^= mixed >> np.uint64(27)
    return int(mixed.sum(dtype=np.uint64))


def tell(told: dict) -> None:
    """Print the report for people."""
    lost = told["dye_after"] / told["dye_before"] - 1
    print(
        f"{told['ranks']} ranks, {told['steps']} steps in {told['dim']}-D: {told['cells']} cells "
        f"(by level {told['cells_of_level']}), {told['cells_made_anew']} made anew on the way\n"
        f"split {told['splits']} times, {told['cells_moved']} cells moved; work of the busiest "
        f"rank above the mean: at most {told['imbalance_before_splits']:.1%} before, "
        f"{told['imbalance_left']:.1%} after\n"
        f"dye {told['dye_after']:.12g}, change {lost:.1e}; checksum of fields {told['checksum']}\n"
        f"{told['seconds']:.2f} s, of them on the slowest rank:"
    )
    for name, seconds in sorted(told["seconds_of_slowest_rank"].items(), key=lambda row: -row[1]):
        print(f"  {name:12s} {seconds:8.3f} s")


def options(arguments: list[str]) -> argparse.Namespace:
    """Read the command line."""
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--dim", type=int, default=2, choices=(2, 3))
    parser.add_argument("--shape", type=int, nargs="*", default=[], help="roots along each axis")
    parser.add_argument("--levels", type=int, default=4, help="of refinement, at most")
    parser.add_argument("--steps", type=int, default=200)
    parser.add_argument("--every", type=int, default=10, help="steps between two adaptations")
    parser.add_argument(
        "--policy",
        choices=("clock", "tolerance"),
        default="clock",
        help="split again when it pays by the measured times, or when the work is out of balance",
    )
    parser.add_argument("--tolerance", type=float, default=0.05, help="imbalance to live with")
    parser.add_argument("--save", type=Path, help="folder for the cells of each rank (.npz)")
    parser.add_argument("--json", action="store_true")
    given = parser.parse_args(arguments)
    if given.shape and (
        len(given.shape) != given.dim or min(given.shape) < 1 or given.shape[0] < 3
    ):
        parser.error(
            "--shape wants a number an axis, at least 3 along the first, which is periodic"
        )
    return given


def main() -> None:
    given, world = options(sys.argv[1:]), MPI.COMM_WORLD
    solver = Solver(given, world)
    before = solver.dye_there_is()
    began = time.perf_counter()
    solver.run()
    told = solver.report(before, time.perf_counter() - began)
    if given.save:
        np.savez(given.save / f"rank{world.rank}.npz", near_indptr=solver.cells["near"].indptr,
                 near_gid=solver.cells["near"].data,
                 **{k: v for k, v in solver.cells.items() if k != "near"})  # fmt: skip
    if world.rank == 0:
        print(json.dumps(told, indent=1)) if given.json else tell(told)


if __name__ == "__main__":
    with ending_together():
        main()
