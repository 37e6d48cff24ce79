"""Rules for re-splitting over whole runs: the table "When to re-split" of DEVELOPERS.md.

    python -m tools.bench.replay                      # all series, 64 parts
    python -m tools.bench.replay front --size 16      # one of them, larger
    python -m tools.bench.replay spots --dear 3       # re-splits three times as dear

front: a tidal front sweeps a box refined around it, a frame a step, a finest cell a step; spots:
burning spots on one mesh, three steps a frame; slow: one rank at half speed for a while. For each
rule: predicted seconds over those of hindsight (regret), number of re-splits, bytes moved; then
the regret where the rule sees times with 2 % noise (mean of ten draws), and with 1 % of the steps
late by a factor of 3 on top. Rules that see no times are left out there. Deterministic.
"""

from __future__ import annotations

import argparse
import sys
import time
from collections.abc import Iterator
from dataclasses import replace

import numpy as np

import sfcpart
from sfcpart.resplit.hindsight import follow, hindsight
from sfcpart.resplit.replayed import check_rules, replay_rules
from sfcpart.resplit.timetable import Timetable
from tools.series.front import front_series
from tools.series.spots import slow_series, spot_series

RULES = (
    "never",
    "every:1",
    "every:5",
    "every:20",
    "threshold:0.1",
    "threshold:0.5",
    "stop-at-rise",
    "clock",
    "best-period",
    "hindsight",
)
DRAWS = 10


def frames_of(which: str, size: int, n_parts: int) -> Iterator[sfcpart.Frame]:
    """Make a series."""
    if which == "front":
        # n = 8: the front crosses 26 cubes of 8 finest cells
        return front_series(size, n_frames=26 * size, steps=1)
    if which == "spots":
        return spot_series(2 * size, n_frames=200, steps=3)
    return slow_series(2 * size, n_parts=n_parts, n_frames=200, steps=3)


def noisy(table: Timetable, rng: np.random.Generator, *, late: float) -> np.ndarray:
    """Return the slowest ranks as measured."""
    seen = table.slowest * (1 + 0.02 * rng.standard_normal(table.slowest.shape))
    seen *= np.where(rng.random(seen.shape) < late, 3.0, 1.0)
    return np.maximum(seen, table.mean)


def mean_regret(table: Timetable, rule: str, *, late: float) -> str:
    """Return the mean regret under noise, nothing for rules that see no times."""
    if not rule.startswith(("threshold", "stop", "clock")):
        return ""
    best, rng = hindsight(table).seconds, np.random.default_rng(0)
    ((_, start),) = check_rules([rule])
    found = [follow(table, start, seen=noisy(table, rng, late=late)).seconds for _ in range(DRAWS)]
    return f"{np.mean(found) / best - 1:.2%}"


def show(which: str, table: Timetable, took: float) -> None:
    """Print one table."""
    found = replay_rules(table, RULES)
    cells, n = table.n_cells, table.n_frames
    print(
        f"\n`{which}`: {n} frames, {table.steps.sum()} steps, {cells.min():,} to {cells.max():,} "
        f"cells, {table.n_parts} parts; a re-split costs {mean_cost(table):.1f} mean steps; "
        f"{took:.0f} s\n"
    )
    print("| rule | regret | re-splits | MB moved | with 2 % noise | and late steps |")
    print("|---|---:|---:|---:|---:|---:|")
    for row in found.figures():
        name = row["rule"]
        rule = f"`{name}`" if row["period"] is None else f"`{name}` ({row['period']})"
        noise = [mean_regret(table, name, late=late) for late in (0.0, 0.01)]
        moved = f"{row['moved_bytes'] / 1e6:,.0f}"
        figures = (f"{row['regret']:.2%}", str(row["n_resplits"]), moved, *noise)
        print(f"| {rule} | {' | '.join(figures)} |")


def mean_cost(table: Timetable) -> float:
    """Return the cost of re-splitting after one frame in mean steps."""
    k = np.arange(1, table.n_frames)
    return float((table.cost[k - 1, k] / table.mean[k, k]).mean())


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("which", nargs="*", choices=[[], "front", "spots", "slow"])
    parser.add_argument("--size", type=int, default=8)
    parser.add_argument("--parts", type=int, default=64)
    parser.add_argument("--dear", type=float, default=1.0, help="factor on costs of re-splits")
    given = parser.parse_args()
    for which in given.which or ("front", "spots", "slow"):
        begin = time.perf_counter()
        series = frames_of(which, given.size, given.parts)
        found = sfcpart.replay(series, given.parts, rules=["never"], progress=tell)
        table = replace(found.timetable, cost=given.dear * found.timetable.cost)
        show(which, table, time.perf_counter() - begin)


def tell(done: int) -> None:
    """Say how far it is."""
    if done % 20 == 0:
        print(f"{done} frames", file=sys.stderr, flush=True)


if __name__ == "__main__":
    main()
