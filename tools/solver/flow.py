"""Advection and diffusion of dye in the Skerry Channel (invented), by explicit finite volumes.

The tide runs along the channel and winds between its walls: fluxes are differences of a stream
function at the corners of faces, so that every cell, with hanging faces or without, lets out what
comes in. Upwind advection, two-point diffusion; then dye settles on silt and comes off again, in
many small steps wherever there is dye: the work of a cell depends on what is in it.

The same bits on any ranks: both sides of a face find its flux from the same numbers in the same
order, each cell adds its faces in the order of its neighbours' global numbers, and all that is not
exact arithmetic (sines, exponentials) comes from tables that every rank makes whole.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from forest import Forest, rows_of
from mpi4py import MPI

from sfcpart.parallel import Halo

TIDE, WINDING, DIFFUSION, PERIOD = 1.0, 0.35, 0.002, 40.0
SETTLING, LIFTING, SUBSTEPS, DYED = 0.3, 0.2, 16, 1e-3


@dataclass(frozen=True, eq=False)
class Channel:
    """What every rank knows of the channel: tables along the axes, and the time step."""

    forest: Forest
    across: np.ndarray
    along: np.ndarray
    depth: np.ndarray
    step: float

    @classmethod
    def of(cls, forest: Forest) -> Channel:
        """Make the tables."""
        fine = 1 << forest.deepest
        x, y = (np.arange(n + 1) / fine for n in forest.extent[:2])
        length, width = forest.shape[:2]
        along = np.sin(2 * np.pi * x / length)
        along[-1] = along[0]  # the channel closes on itself
        across = np.sin(np.pi * y / width)
        depth = np.ones(2)
        if forest.dim == 3:  # the stream is slower at the bed: integral of 1/2 + z / height
            z = np.arange(forest.extent[2] + 1) / fine
            depth = z / 2 + z * z / (2 * forest.shape[2])
        fastest = 1.5 * (TIDE + np.pi * WINDING * (1 / width + 2 / length))
        step = 0.4 / fine / (fastest + 2 * forest.dim * DIFFUSION * fine)
        return cls(forest, across, along, depth, step)

    def stream(self, x: np.ndarray, y: np.ndarray) -> np.ndarray:
        """Return the stream function at corners, given in finest cells; constant on the walls."""
        fine = 1 << self.forest.deepest
        return TIDE * (y / fine) + WINDING * self.along[x] * self.across[y]

    def cloud(self, cells: dict) -> np.ndarray:
        """Return the first dye: a cloud upstream of the pier."""
        twice = 2 * self.forest.anchor(cells["gid"]) + self.forest.size(cells["level"])[:, None]
        dye = np.ones(len(twice))
        for axis, n in enumerate(self.forest.shape):
            place = np.arange(2 * self.forest.extent[axis] + 1) / (2 << self.forest.deepest)
            middle = n / 4 if axis == 0 else 0.4 * n
            spread = 0.18 * min(self.forest.shape)
            dye *= np.exp(-(((place - middle) / spread) ** 2))[twice[:, axis]]
        dye[dye < 1e-6] = 0
        return dye


class Flow:
    """The faces of the owned cells, with what flows through them, and the halo they need."""

    def __init__(self, channel: Channel, cells: dict, world: MPI.Intracomm) -> None:
        forest = channel.forest
        near = cells["near"].data
        self.channel, self.world = channel, world
        self.halo = Halo.from_graph(*cells["near"], cell_gid=cells["gid"], comm=world)
        self.n_owned, self.row = self.halo.n_owned, rows_of(cells["near"])
        self.near = self.halo.local_rows(near)
        level = cells["level"]
        level = np.append(level, self.halo.exchange(level))
        ends = (cells["gid"][self.row], level[self.row]), (near, level[self.near])
        _, axis, self.is_lower = forest.contact(*ends)
        self.water, self.mixing = _through(channel, ends, axis, self.is_lower)
        self.dye = np.append(cells["dye"], np.zeros(self.halo.n_halo))
        cells["dye"] = self.dye[: self.n_owned]  # the same memory: owned rows, then the halo
        self.volume = forest.volume(level[: self.n_owned])
        outer = np.zeros(self.n_owned, bool)
        outer[self.row[self.near >= self.n_owned]] = True
        outer = outer[self.row]
        self.faces = {"inner": np.flatnonzero(~outer), "outer": np.flatnonzero(outer)}

    def change(self, which: str, dye: np.ndarray, tide: float) -> np.ndarray:
        """Return what flows into each cell over some of the faces, added in their order."""
        face = self.faces[which]
        here, there = dye[self.row[face]], dye[self.near[face]]
        is_lower = self.is_lower[face]
        low, high = np.where(is_lower, here, there), np.where(is_lower, there, here)
        water = tide * self.water[face]
        flow = water * np.where(water > 0, low, high) - self.mixing[face] * (high - low)
        return np.bincount(self.row[face], np.where(is_lower, -flow, flow), self.n_owned)

    def advance(self, cells: dict, *, time: float, watch) -> None:
        """Take one step, in place."""
        dye, owned = self.dye, cells["dye"]
        tide = float(np.cos(2 * np.pi * time / PERIOD))
        with watch("halo"):
            coming = self.halo.start(dye)
        with watch("flow"):  # the halo is on its way meanwhile
            change = self.change("inner", dye, tide)
        with watch("halo"):
            coming.finish()
        with watch("flow"):
            change += self.change("outer", dye, tide)
            owned += self.channel.step * change / self.volume
            settle(owned, cells["bound"], self.channel.step)


def _through(channel: Channel, ends: tuple, axis: np.ndarray, is_lower: np.ndarray):
    """Return the water through each face at full tide, along its axis, and the mixing."""
    forest = channel.forest
    (gid, level), (near, level_near) = ends
    low = np.stack([forest.anchor(gid), forest.anchor(near)])
    size = np.stack([forest.size(level), forest.size(level_near)])
    high = low + size[:, :, None]
    start, stop = low.max(axis=0), high.min(axis=0)  # the face, but for its own axis
    place = np.where(is_lower, high[0][np.arange(len(axis)), axis],
                     low[0][np.arange(len(axis)), axis])  # fmt: skip
    place = np.where(axis == 0, place % forest.extent[0], place)
    x_0, x_1 = start[:, 0], np.where(stop[:, 0] > start[:, 0], stop[:, 0], start[:, 0])
    y_0, y_1 = start[:, 1], stop[:, 1]
    along = channel.stream(place * (axis == 0), np.where(axis == 0, y_1, 0))
    along -= channel.stream(place * (axis == 0), np.where(axis == 0, y_0, 0))
    across = channel.stream(np.where(axis == 1, x_0, 0), place * (axis == 1))
    across -= channel.stream(np.where(axis == 1, x_1, 0), place * (axis == 1))
    water = np.where(axis == 0, along, np.where(axis == 1, across, 0.0))
    if forest.dim == 3:
        water = water * (channel.depth[np.where(axis < 2, stop[:, 2], 0)]
                         - channel.depth[np.where(axis < 2, start[:, 2], 0)])  # fmt: skip
    fine = 1 << forest.deepest
    area = (np.minimum(size[0], size[1]) / fine) ** (forest.dim - 1)
    return water, DIFFUSION * area / ((size[0] + size[1]) / (2 * fine))


def settle(dye: np.ndarray, bound: np.ndarray, step: float) -> None:
    """Let dye settle on silt and come off again, where there is enough of either."""
    busy = is_busy(dye, bound)
    free, held = dye[busy], bound[busy]
    for _ in range(SUBSTEPS):
        moved = (step / SUBSTEPS) * (SETTLING * free / (1 + free) - LIFTING * held)
        free, held = free - moved, held + moved
    dye[busy], bound[busy] = free, held


def is_busy(dye: np.ndarray, bound: np.ndarray) -> np.ndarray:
    """Tell which cells have enough dye to be worth the work."""
    return dye + bound > DYED


def work_of(cells: dict) -> np.ndarray:
    """Return the work of each cell in one step, in units of a clear one."""
    return np.where(is_busy(cells["dye"], cells["bound"]), 1.0 + SUBSTEPS / 8, 1.0)
