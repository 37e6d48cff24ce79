"""Time keys, order, split and cell_part of random 3-D centres against one argsort of the keys.

    python tools/bench/curve_split.py [--cells 10000000] [--parts 1000] [--repeats 5]

All figures come from one run, the kernels compiled before. In each round every piece of work is
done once, so that whatever else the machine does falls on all alike; figures are medians over the
rounds, ratios medians of the ratios within a round. The reference is
`np.argsort(keys, kind="stable")` on the same keys. Processor time (of all threads together) is
shown beside, since it tells more where the machine is not idle. The last lines say what limits
the work: the bytes it must move through memory, and how long this machine takes to copy as many.
"""

from __future__ import annotations

import argparse
import statistics
import time
from collections.abc import Callable

import numpy as np

from sfcpart.comm import SerialComm
from sfcpart.curve import curve_keys, curve_order
from sfcpart.kernels.curve.radix import stable_order
from sfcpart.kernels.threads import n_threads, run_ranges
from sfcpart.methods.problem import Problem
from sfcpart.methods.registry import METHODS

TARGET = 0.35


def measure(
    work: dict[str, Callable[[], object]], rounds: int
) -> tuple[dict[str, list[float]], dict[str, float]]:
    seconds: dict[str, list[float]] = {name: [] for name in work}
    cpu = dict.fromkeys(work, float("inf"))
    for call in work.values():
        call()
    for _ in range(rounds):
        for name, call in work.items():
            began, cpu_began = time.perf_counter(), time.process_time()
            call()
            seconds[name].append(time.perf_counter() - began)
            cpu[name] = min(cpu[name], time.process_time() - cpu_began)
    return seconds, cpu


def copy_rows(start: int, stop: int, source: np.ndarray, target: np.ndarray) -> None:
    target[start:stop] = source[start:stop]


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--cells", type=int, default=10_000_000)
    parser.add_argument("--parts", type=int, default=1000)
    parser.add_argument("--repeats", type=int, default=5)
    given = parser.parse_args()
    n, n_parts = given.cells, given.parts
    rng = np.random.default_rng(0)
    centers = rng.random((n, 3))
    weight = rng.integers(1, 1_000_000, n)
    keys = curve_keys(centers)

    def split(weight: np.ndarray | None = None) -> object:
        problem = Problem(
            centers, n_parts, np.ones(n_parts), SerialComm(), graph=lambda: None, weight=weight
        )
        return METHODS["hilbert"].run(problem)

    spare = np.empty_like(keys)
    work: dict[str, Callable[[], object]] = {
        "np.argsort(keys, kind='stable')": lambda: np.argsort(keys, kind="stable"),
        "keys": lambda: curve_keys(centers),
        "sort keys": lambda: stable_order(keys),
        "keys and order": lambda: curve_order(centers),
        f"keys, order, split into {n_parts}, cell_part": split,
        "the same with weights": lambda: split(weight),
    }
    work["copy"] = lambda: run_ranges(copy_rows, n, keys, spare)
    seconds, cpu = measure(work, given.repeats)
    copy = statistics.median(seconds.pop("copy"))
    references = next(iter(seconds.values()))
    reference = statistics.median(references)
    print(f"{n} random centres, {n_threads()} threads, medians of {given.repeats} rounds")
    for name, values in seconds.items():
        ratio = statistics.median(v / r for v, r in zip(values, references, strict=True))
        print(
            f"  {name:48s} {statistics.median(values):7.3f} s   ratio {ratio:.3f}"
            f"   least cpu {cpu[name]:.3f} s"
        )
    # centres twice (box, keys); keys written, and read by survey, count, scatter, two more surveys;
    # key and row written by the scatter, read and written by the finish; rows, labels, parts
    moved = n * (2 * 24 + 8 + 5 * 8 + 12 + 2 * 12 + 4 + 2 * 4 + 4)
    rate = 16 * n / copy
    print(
        f"  limit: {moved / 1e9:.2f} GB at {rate / 1e9:.1f} GB/s (copying, all threads) = "
        f"{moved / rate:.3f} s, ratio {moved / rate / reference:.3f}; target {TARGET}"
    )


if __name__ == "__main__":
    main()
