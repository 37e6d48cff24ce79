"""Inside a running solver: split, halo exchange and migration over the arrays a rank holds.

All arguments are rank-local, and a communicator is always an argument: one of mpi4py (kept apart
by a duplicate made on first use) or one of `sfcpart.comm`. Nothing happens at import, and bulk
data travels as bytes, never pickled. `sfcpart manual in_a_solver` has a complete example.
"""

from __future__ import annotations

from sfcpart.comm.ending import ending_together
from sfcpart.parallel.carry_out import carry_out
from sfcpart.parallel.columns import Ragged
from sfcpart.parallel.halo import Halo
from sfcpart.parallel.migrate import migrate
from sfcpart.parallel.resplit import LocalResplit, resplit_local
from sfcpart.parallel.split import split_local
from sfcpart.slices.exchange import Exchange
from sfcpart.slices.lists import ExchangePlan

__all__ = [
    "Exchange",
    "ExchangePlan",
    "Halo",
    "LocalResplit",
    "Ragged",
    "carry_out",
    "ending_together",
    "migrate",
    "resplit_local",
    "split_local",
]
