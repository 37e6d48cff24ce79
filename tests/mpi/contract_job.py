"""The job of `test_contract.py`: every rank runs every scenario and writes down what it saw."""

from __future__ import annotations

import json
import sys
from pathlib import Path

from sfcpart.comm import world
from tests.unit.comm.contract import SCENARIOS


def main() -> None:
    comm = world()
    seen = {"communicator": type(comm).__name__, "same world": comm is world()}
    for name, (act, _) in SCENARIOS.items():
        seen[name] = act(comm)
    target = Path(sys.argv[1]) / f"rank{comm.rank}.json"
    target.write_text(json.dumps(seen))
    comm.barrier()


if __name__ == "__main__":
    main()
