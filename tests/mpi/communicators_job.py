"""The job of `test_communicators.py`: communicators other than all ranks."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import numpy as np


def main() -> None:
    from mpi4py import MPI  # not above: pytest imports this module when it looks for doctests

    from sfcpart.comm.mpi import MpiComm

    world = MPI.COMM_WORLD
    half = MpiComm(world.Split(world.rank % 2, -world.rank))  # every second rank, in reverse
    alone = MpiComm(MPI.COMM_SELF)
    pending = world.irecv(source=MPI.ANY_SOURCE, tag=MPI.ANY_TAG)  # must not catch our messages
    received = half.alltoall([np.array([world.rank, r]) for r in range(half.size)])
    world.isend("ours", dest=world.rank, tag=1).wait()
    seen = {
        "half": [half.rank, half.size, [array.tolist() for array in received]],
        "alone": [alone.rank, alone.size, alone.exscan(np.array([3])).tolist()],
        "pending": pending.wait(),
    }
    (Path(sys.argv[1]) / f"rank{world.rank}.json").write_text(json.dumps(seen))


if __name__ == "__main__":
    main()
