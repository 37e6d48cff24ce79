"""Time the halo exchange of 8 doubles a cell against the same bytes sent by bare mpi4py.

    mpiexec -n 2 python tools/bench/halo_exchange.py [--side 64] [--repeats 400]

Cells are a lattice of side x side x (2 side) unit cubes, split by `split_local`. Two references
send what the halo needs to the same neighbours with Isend and Irecv: "messages" from buffers that
are full already into buffers that nobody empties, and "by hand" with what every solver must do
besides, the gathering of the rows to send (the halo rows are received in place). In each round
every exchange is done once, in turn; figures are medians over the rounds of the slowest rank,
ratios medians of the ratios within a round.
"""

from __future__ import annotations

import argparse
import statistics
import time

import numpy as np
from mpi4py import MPI

from sfcpart.parallel import Halo, migrate, split_local

WIDTH = 8
TARGET = 1.5


def lattice_halo(side: int, world: MPI.Intracomm) -> Halo:
    """Split a lattice, move its cells, and make their halo."""
    shape = np.array([side, side, 2 * side])
    gid = np.arange(world.rank, int(np.prod(shape)), world.size)
    place = np.stack(np.unravel_index(gid, shape), axis=1)
    stride = np.array([shape[1] * shape[2], shape[2], 1])
    near = [
        np.where((place[:, a] + d >= 0) & (place[:, a] + d < shape[a]), gid + d * stride[a], -1)
        for a in range(3)
        for d in (-1, 1)
    ]
    cells = {"gid": gid, "near": np.stack(near, axis=1)}
    part = split_local(place + 0.5, comm=world, cell_gid=gid)
    cells = migrate(cells, destination=part, comm=world, order_by="gid")
    indptr = 6 * np.arange(len(cells["gid"]) + 1)
    return Halo.from_graph(indptr, cells["near"].ravel(), cell_gid=cells["gid"], comm=world)


class ByHand:
    """What a solver would write with mpi4py alone."""

    def __init__(self, halo: Halo, array: np.ndarray, world: MPI.Intracomm) -> None:
        self.plan, self.array, self.world = halo.plan, array, world
        self.sent = np.zeros((len(self.plan.send), WIDTH))
        self.spare = np.zeros((halo.n_halo, WIDTH))
        self.inside = array[halo.n_owned :]

    def messages(self) -> None:
        """Send full buffers, receive into spare ones."""
        self._send(self.spare)

    def exchange(self) -> None:
        """Gather the rows, send them, receive halo rows in place."""
        np.take(self.array, self.plan.send, axis=0, out=self.sent, mode="clip")
        self._send(self.inside)

    def _send(self, received: np.ndarray) -> None:
        waiting = [self.world.Irecv(received[lo:hi], rank) for rank, lo, hi in self.plan.sources()]
        for rank, lo, hi in self.plan.targets():
            waiting.append(self.world.Isend(self.sent[lo:hi], rank))
        MPI.Request.Waitall(waiting)


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--side", type=int, default=64)
    parser.add_argument("--repeats", type=int, default=400)
    given = parser.parse_args()
    world = MPI.COMM_WORLD
    halo = lattice_halo(given.side, world)
    array = np.random.default_rng(world.rank).random((halo.n_owned + halo.n_halo, WIDTH))
    bare = ByHand(halo, array, world)
    bare.exchange()
    wanted = array.copy()
    array[halo.n_owned :] = 0
    halo.exchange(array)
    assert np.array_equal(array, wanted)
    work = {
        "messages": bare.messages,
        "by hand": bare.exchange,
        "Halo": lambda: halo.exchange(array),
    }
    seconds: dict[str, list[float]] = {name: [] for name in work}
    for _ in range(given.repeats):
        for name, call in work.items():
            world.Barrier()
            began = time.perf_counter()
            call()
            mine = time.perf_counter() - began
            seconds[name].append(world.allreduce(mine, op=MPI.MAX))
    if world.rank == 0:
        print(
            f"{world.size} ranks, {array.shape[0]} rows on rank 0, {halo.n_halo} of the halo, "
            f"{halo.n_halo * WIDTH * 8 / 1e6:.3f} MB received"
        )
        for name, values in seconds.items():
            ratios = [
                statistics.median(v / r for v, r in zip(values, seconds[ref], strict=True))
                for ref in ("messages", "by hand")
            ]
            print(
                f"  {name:10s} {statistics.median(values) * 1e6:9.1f} us   "
                f"to messages {ratios[0]:.2f}, to by hand {ratios[1]:.2f}"
            )
        print(f"  target: Halo at most {TARGET} times by hand")


if __name__ == "__main__":
    main()
