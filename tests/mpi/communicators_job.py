"""The job of `test_communicators.py`: communicators other than all ranks."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import numpy as np


def main() -> None:
    from mpi4py import MPI  # not above: pytest imports this module when it looks for doctests

    from sfcpart.comm import adopt
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
    ours = adopt(world)
    seen["adopted"] = [ours is adopt(world), ours is adopt(MPI.COMM_WORLD), ours is adopt(ours)]
    for _ in range(3000):  # more than MPI has room for at once: each must be freed with its parent
        brief = MPI.COMM_SELF.Dup()
        seen["freed"] = adopt(brief).size
        brief.Free()
    seen["refused"] = [refusal(adopt, "nothing"), refusal(adopt, MPI.COMM_NULL)]
    (Path(sys.argv[1]) / f"rank{world.rank}.json").write_text(json.dumps(seen))


def refusal(action, value) -> str:
    """Return the error with which a value is refused."""
    try:
        action(value)
    except ValueError as error:
        return f"{type(error).__name__}: {error}"
    return "taken"


if __name__ == "__main__":
    main()
