"""The job of `test_harness.py`: rank 0 fails, or waits for ever, as its folder's name says."""

from __future__ import annotations

import sys
import time
from pathlib import Path

from sfcpart.comm import world


def main() -> None:
    comm = world()
    comm.barrier()
    if Path(sys.argv[1]).name == "fails":
        comm.check(ValueError("on purpose") if comm.rank == 0 else None)
    if comm.rank == 0:
        time.sleep(600)
    comm.barrier()


if __name__ == "__main__":
    main()
