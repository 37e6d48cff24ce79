"""Count what selecting cut positions along the curve costs a rank, on many virtual ranks.

    python tools/ranks/select_cuts.py [--ranks 30 100 300 1000] [--json]

The same code that splits under MPI runs on virtual ranks (threads of this process) with small
slices, through a communicator that counts (`counted.py`). Two stages: the sort of the keys, in
which each rank gets a stretch of the curve, and the search of the cut positions. What does not
depend on the slice (rounds, and bytes beside the cells' own) is fitted by least squares to

    bytes = a + b ranks + c parts + d parts^2 / cells,

and said for 1e5 ranks, 1e5 parts and 1e11 cells. The last term counts the cuts that may lie on one
stretch, in the tens here, where parts have few cells, and one there. The keys of the cells that a
rank sends and gets once while it sorts, 16 bytes each, come to that.
"""

from __future__ import annotations

import argparse
import json

import numpy as np
from counted import Counted
from scipy.optimize import nnls

from sfcpart.comm import run_ranks
from sfcpart.curve import curve_slice
from sfcpart.methods.curve.chunks import cut_line
from sfcpart.methods.curve.line import Line

MOST_ROUNDS, MOST_BYTES = 64, 100e6
RANKS, PARTS, CELLS = 1e5, 1e5, 1e11


def select(comm, *, n_local: int, n_parts: int, heaviest: int) -> dict:
    """Sort random cells along the curve, cut them by random weights; return the counts."""
    rng = np.random.default_rng(comm.rank)
    centers = rng.random((n_local, 3)) ** 2  # denser towards a corner
    weight = rng.integers(1, heaviest, n_local)
    sort, search = Counted(comm), Counted(comm)
    place = curve_slice(centers, comm=sort)
    line = Line.of(len(place), weight=place.gather(weight), limit_weight=None, reach=2, comm=search)
    cut = cut_line(line, begin=0, end=line.n_items, speed=np.ones(n_parts))
    whole = int(comm.allreduce(weight.sum(keepdims=True))[0])
    sums = line.sums_at(cut)[:, 0]
    assert sums[-1] == whole
    return {
        "ranks": comm.size,
        "parts": n_parts,
        "cells": n_local * comm.size,
        "sort rounds": sort.rounds.total(),
        "sort bytes": beside_rows(sort),
        "row bytes": sort.bytes["rows"],
        "cut rounds": search.rounds.total(),
        "cut bytes": beside_rows(search),
        "walks": search.rounds["relay"] // 2,
        "imbalance": float(np.diff(sums).max() * n_parts / whole - 1),
    }


def beside_rows(counted: Counted) -> int:
    """Return the bytes of all but the cells themselves."""
    return counted.bytes.total() - counted.bytes["rows"]


def busiest(ranks: list[dict]) -> dict:
    """Return the largest count of any rank."""
    return {name: max(rank[name] for rank in ranks) for name in ranks[0]}


def terms(size: float, parts: float, cells: float) -> np.ndarray:
    """Return what the bytes grow with; the last: cuts that can lie on one stretch."""
    return np.array([np.ones_like(size), size, parts, parts * parts / cells])


def fitted(rows: list[dict], name: str) -> np.ndarray:
    """Fit the bytes, relative errors alike, no factor below 0."""
    columns = terms(*(np.array([row[key] for row in rows], float)
                      for key in ("ranks", "parts", "cells")))  # fmt: skip
    value = np.array([row[name] for row in rows], float)
    return nnls((columns / value).T, np.ones_like(value))[0]


def said(rows: list[dict]) -> dict:
    """Fit the counts; say what 1e11 cells on 1e5 ranks into 1e5 parts would need."""
    fits = {name: fitted(rows, name) for name in ("sort bytes", "cut bytes")}
    far = {name: float(factor @ terms(RANKS, PARTS, CELLS)) for name, factor in fits.items()}
    keys = 16 * CELLS / RANKS
    n_rounds = {stage: max(row[f"{stage} rounds"] for row in rows) for stage in ("sort", "cut")}
    n_bytes = sum(far.values()) + keys
    return {
        "fit": {name: factor.tolist() for name, factor in fits.items()},
        "bytes of cut positions": far["cut bytes"],
        "bytes of sort": far["sort bytes"],
        "bytes of keys": keys,
        "bytes": n_bytes,
        "rounds seen": n_rounds,
        "rounds": sum(n_rounds.values()),
        "within": n_bytes < MOST_BYTES and sum(n_rounds.values()) < MOST_ROUNDS,
    }


def tell(rows: list[dict], far: dict) -> None:
    """Print the table and what follows."""
    print("a rank, at most    |  sort of the keys        |  cut positions")
    print("ranks parts  cells | rounds  bytes  of cells  | rounds  walks  bytes   imbalance")
    for row in rows:
        print(
            f"{row['ranks']:5d} {row['parts']:5d} {row['cells']:6d} | {row['sort rounds']:6d} "
            f"{row['sort bytes']:7d} {row['row bytes']:7d}  | {row['cut rounds']:6d} "
            f"{row['walks']:6d} {row['cut bytes']:7d}  {row['imbalance']:9.2%}"
        )
    for name, (a, b, c, d) in far["fit"].items():
        print(f"{name}: {a:.0f} + {b:.1f} ranks + {c:.1f} parts + {d:.1f} parts^2 / cells")
    print(
        f"1e11 cells, 1e5 ranks, 1e5 parts, a rank: cut positions "
        f"{far['bytes of cut positions'] / 1e6:.1f} MB, sort {far['bytes of sort'] / 1e6:.1f} MB "
        f"and {far['bytes of keys'] / 1e6:.1f} MB of keys, "
        f"{far['bytes'] / 1e6:.1f} MB in all; at most {far['rounds']} rounds seen "
        f"({far['rounds seen']})\n"
        f"bounds of {MOST_BYTES / 1e6:.0f} MB and {MOST_ROUNDS} rounds: "
        f"{'kept' if far['within'] else 'NOT KEPT'}; a walk passes all ranks one after another"
    )


def cases(size: int, cells: list[int]) -> list[tuple[int, int]]:
    """Return cells a rank and parts to try; one of each from 1000 ranks on, to save time."""
    if size >= 1000:
        return [(cells[0], size)]
    return [
        (n, p) for n in cells for p in (max(2, size // 10), size, min(10 * size, size * n // 2))
    ]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--ranks", type=int, nargs="*", default=[30, 100, 300, 1000])
    parser.add_argument("--cells", type=int, nargs="*", default=[60, 240], help="a rank")
    parser.add_argument("--heaviest", type=int, default=1000, help="weights go up to this")
    parser.add_argument("--json", action="store_true")
    given = parser.parse_args()
    rows = []
    for size in given.ranks:
        for n_local, n_parts in cases(size, given.cells):
            work = {"n_local": n_local, "n_parts": n_parts, "heaviest": given.heaviest}
            counts = run_ranks(size, lambda comm: select(comm, **work), timeout=1800)  # noqa: B023
            rows.append(busiest(counts))
    rows.sort(key=lambda row: (row["ranks"], row["parts"], row["cells"]))
    far = said(rows)
    print(json.dumps({"rows": rows, **far}, indent=1)) if given.json else tell(rows, far)


if __name__ == "__main__":
    main()
