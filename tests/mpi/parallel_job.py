"""The job of `test_parallel.py`: the acts that threads run too, over a communicator of mpi4py."""

from __future__ import annotations

import hashlib
import json
import sys
import tracemalloc
from pathlib import Path
from typing import Any

import numpy as np

from sfcpart.parallel import Halo, migrate, split_local
from tests.unit.parallel.clouds import DTYPES, TRAILING, Spread, values_of

SEEDS = range(6)


def digest(*arrays: np.ndarray) -> str:
    """Return a checksum of forms and bytes."""
    seen = hashlib.sha256()
    for array in arrays:
        seen.update(f"{array.dtype.descr}{array.shape}".encode() + array.tobytes())
    return seen.hexdigest()[:16]


def act(comm: Any, rank: int, size: int) -> list[str]:
    """Exchange, add back, migrate and split on random spreads of cells; write down what comes."""
    lines = []
    for seed in SEEDS:
        spread = Spread.of(seed, size)
        gid = spread.cells(rank)
        halo = Halo.from_graph(*spread.graph(rank), cell_gid=gid, comm=comm)
        lines.append(str(halo.halo_gid.tolist()))
        for dtype in DTYPES:
            for trailing in TRAILING:
                owned = values_of(gid, dtype, trailing)
                lines.append(digest(halo.exchange(owned)))
        lines += summed(halo, gid)
        lines += moved(comm, gid, size)
        centers = np.stack([gid % 7, gid % 11], axis=1) / 4
        lines.append(digest(split_local(centers, comm=comm, weights=gid + 1.0, cell_gid=gid)))
    return lines


def summed(halo: Halo, gid: np.ndarray) -> list[str]:
    """Add back with two exchanges on their way at once."""
    whole = np.concatenate([gid, halo.halo_gid]) / 3
    other = np.arange(2 * len(whole), dtype=np.int64).reshape(-1, 2)
    ways = [halo.start_back(whole), halo.start(other), halo.start_back(other.copy())]
    return [digest(way.finish()) for way in reversed(ways)] + [digest(whole, other)]


def moved(comm: Any, gid: np.ndarray, size: int) -> list[str]:
    """Move fixed and ragged arrays in small and in large pieces."""
    indptr = np.concatenate(([0], np.cumsum(gid % 5)))
    ragged = (indptr, np.arange(indptr[-1] * 2.0).reshape(-1, 2))
    arrays = {"gid": gid, "record": values_of(gid, DTYPES[-1], (2,)), "ragged": ragged}
    lines = []
    for chunk_bytes in (50, 1 << 20):
        came = migrate(
            arrays, destination=gid % 3 % size, comm=comm, chunk_bytes=chunk_bytes, order_by="gid"
        )
        lines.append(digest(came["gid"], came["record"], *came["ragged"]))
    return lines


def memory_of_a_move(comm: Any, rank: int, size: int) -> dict[str, int]:
    """Send all cells to the next rank in bounded pieces; return the scratch memory it took."""
    n, chunk = 200_000, 1_000_000
    column = np.full((n, 8), float(rank))
    tracemalloc.start()
    came = migrate(
        {"a": column}, destination=np.full(n, (rank + 1) % size), comm=comm, chunk_bytes=chunk
    )
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    right = bool(np.all(came["a"] == (rank - 1) % size)) and came["a"].shape == column.shape
    return {"scratch": peak - came["a"].nbytes, "bound": 40 * n + chunk + 100_000, "right": right}


def main() -> None:
    from mpi4py import MPI  # not above: pytest imports this module when it looks for doctests

    world = MPI.COMM_WORLD
    seen = {
        "lines": act(world, world.rank, world.size),
        "memory": memory_of_a_move(world, world.rank, world.size),
    }
    (Path(sys.argv[1]) / f"rank{world.rank}.json").write_text(json.dumps(seen))


if __name__ == "__main__":
    main()
