"""The job of `test_huge.py`: one array of more than 2^31 bytes goes from rank 0 to all."""

from __future__ import annotations

import json
import sys
from pathlib import Path

import numpy as np

from sfcpart.comm import world

N_BYTES = 2**31 + 12_345
EDGE = slice(2**31 - 2, 2**31 + 2)


def main() -> None:
    comm = world()
    empty = np.zeros(0, np.uint8)
    seen = []
    for exchange in (
        lambda: comm.alltoall([empty] * (comm.size - 1) + [made() if comm.rank == 0 else empty])[0],
        lambda: comm.bcast(made() if comm.rank == 0 else None),
        lambda: comm.allgather(made() if comm.rank == 0 else empty)[0],
    ):
        array = exchange()
        seen.append([len(array), array[EDGE].tolist(), int(array.sum(dtype=np.int64))])
    if comm.rank == comm.size - 1:
        (Path(sys.argv[1]) / "seen.json").write_text(json.dumps(seen))


def made() -> np.ndarray:
    """Make the array: zeros but for its end and for the bytes about the 2^31st."""
    array = np.zeros(N_BYTES, np.uint8)
    array[EDGE] = [1, 2, 3, 4]
    array[-1] = 7
    return array


if __name__ == "__main__":
    main()
