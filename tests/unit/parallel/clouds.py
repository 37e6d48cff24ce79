"""Random distributed cells for the tests of this room, and communicators that count."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

RECORD = np.dtype([("id", np.int64), ("flag", np.bool_), ("velocity", np.float32, (3,))])
DTYPES = ["?", "i1", "i4", "u8", "f4", "f8", "c16", ">f8", "S5", RECORD]
TRAILING = [(), (3,), (2, 2), (0,)]


@dataclass(frozen=True)
class Spread:
    """Cells with gappy numbers on a random graph, each owned by one of `size` ranks."""

    size: int
    gid: np.ndarray
    owner: np.ndarray
    edges: np.ndarray

    @classmethod
    def of(cls, seed: int, size: int) -> Spread:
        """Make it from a seed; often a rank has no cells, and many edges cross."""
        rng = np.random.default_rng([seed, size])
        n = int(rng.integers(0, 40))
        gid = rng.choice(int(rng.choice([n + 1, 10 * n + 1, 2**40])), n, replace=False)
        taking_part = rng.permutation(size)[: rng.integers(1, size + 1)]
        owner = rng.choice(taking_part, n)
        edges = gid[rng.integers(0, n, (int(rng.integers(0, 3 * n + 1)), 2))] if n else gid[:0]
        edges = edges.reshape(-1, 2)
        return cls(size, gid, owner, edges[edges[:, 0] != edges[:, 1]])

    def cells(self, rank: int) -> np.ndarray:
        """Return the numbers of a rank's cells, in its own order."""
        mine = self.gid[self.owner == rank]
        return np.random.default_rng([rank, len(mine)]).permutation(mine)

    def graph(self, rank: int) -> tuple[np.ndarray, np.ndarray]:
        """Return indptr and indices (global) of the graph of a rank's cells, with some -1."""
        rows = []
        for cell in self.cells(rank).tolist():
            near = self.edges[(self.edges == cell).any(axis=1)]
            rows.append([*near[near != cell].tolist(), -1])
        indptr = np.concatenate(([0], np.cumsum([len(row) for row in rows]))).astype(np.int64)
        return indptr, np.array([cell for row in rows for cell in row], np.int64)

    def faces(self, rank: int) -> np.ndarray:
        """Return the edges that touch a rank's cells."""
        return self.edges[np.isin(self.edges, self.cells(rank)).any(axis=1)]

    def halo(self, rank: int) -> list[int]:
        """Return what the halo must be: foreign neighbours by owner, then number."""
        owner_of = dict(zip(self.gid.tolist(), self.owner.tolist(), strict=True))
        near = set(self.faces(rank).ravel().tolist()) - set(self.cells(rank).tolist())
        return sorted(near, key=lambda cell: (owner_of[cell], cell))


def values_of(gid: np.ndarray, dtype, trailing: tuple[int, ...]) -> np.ndarray:
    """Make the rows of cells: each depends on the cell's number and on nothing else."""
    dtype = np.dtype(dtype)
    rows = np.zeros((len(gid), *trailing), dtype)
    for place, cell in enumerate(np.asarray(gid).tolist()):
        rng = np.random.default_rng(cell)
        if dtype.names:
            rows["id"][place], rows["flag"][place] = cell, cell % 2
            rows["velocity"][place] = rng.random((*trailing, 3))
        else:
            rows[place] = np.asarray(rng.integers(0, 100, trailing)).astype(dtype)
    return rows


@dataclass
class Counting:
    """A communicator that counts the bytes it sends to other ranks, and the largest buffer."""

    comm: object
    sent: int = 0
    largest: int = 0
    rounds: int = field(default=0)

    def __getattr__(self, name: str):
        return getattr(self.comm, name)

    def alltoall(self, arrays):
        self.sent += sum(a.nbytes for rank, a in enumerate(arrays) if rank != self.comm.rank)
        return self.comm.alltoall(arrays)

    def allreduce(self, array, op="sum"):
        self.sent += 2 * np.asarray(array).nbytes  # up and down a tree
        return self.comm.allreduce(array, op)

    def bcast(self, array, root=0):
        self.sent += 8
        return self.comm.bcast(array, root)

    def link(self, sent, received, *, targets, sources):
        row_bytes = sent.nbytes // max(1, len(sent))
        self.sent += sum((hi - lo) * row_bytes for r, lo, hi in targets if r != self.comm.rank)
        self.largest = max(self.largest, sent.nbytes)
        self.rounds += 1
        return self.comm.link(sent, received, targets=targets, sources=sources)
